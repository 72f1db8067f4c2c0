/* Samples on their way from the sampling interrupt to the link, in blocks of one frame each.
 * One producer and one consumer; where the consumer is too slow the drops are counted and the
 * next block's index and flag say so. */
#ifndef PD_RING_H
#define PD_RING_H

#include <stdbool.h>
#include <stddef.h>
#include <stdint.h>

#include "frame.h"

struct pd_ring {
    uint8_t count;
    uint8_t channels;
    uint8_t format;
    uint8_t in; /* block being filled */
    uint8_t out;
    bool is_overrun;
    volatile uint8_t published; /* blocks, modulo 256 */
    volatile uint8_t taken;
    uint16_t block_bytes;
    uint16_t slots;
    struct pd_frame *blocks; /* the caller's, `count` of them */
    uint8_t *payload;        /* the caller's, `count` times `block_bytes` */
    uint32_t dropped;        /* samples (of all channels) that found no room */
    uint32_t stream;
    uint32_t sequence;
};

/* count: 2 to 127 blocks of at most slots_max samples per channel. */
void pd_ring_init(struct pd_ring *ring, struct pd_frame *blocks, uint8_t *payload, uint8_t count,
                  uint16_t slots_max, uint8_t channels, uint8_t format);

/* Begin a stream; what is in the ring stays there under its own stream id. */
void pd_ring_begin(struct pd_ring *ring, uint32_t stream, uint16_t slots);

/* Put one sample of every channel, or count it as dropped. */
void pd_ring_push(struct pd_ring *ring, const int32_t *scan, uint64_t index, uint64_t clock,
                  uint16_t flags);

/* Count a sample that was not there; the block being filled ends before it. */
void pd_ring_miss(struct pd_ring *ring);

/* Let the block that is being filled go as it is. */
void pd_ring_publish(struct pd_ring *ring);

/* Write the oldest whole block as a frame; return its length, 0 if there is none. */
size_t pd_ring_encode(struct pd_ring *ring, uint8_t *out, size_t size);

#endif
