/* A samples frame. */
#ifndef PD_FRAME_H
#define PD_FRAME_H

#include <stddef.h>
#include <stdint.h>

#include "envelope.h"
#include "wire.h"

enum {
    PD_FRAME_HEAD = 36,
    PD_FRAME_KIND = PD_SAMPLES | PD_WIRE_VERSION << 8
};

/* Room that a frame needs on the wire, at most. */
#define PD_FRAME_MAX(slots, channels, format) \
    PD_WRAPPED_MAX((size_t)PD_FRAME_HEAD + (size_t)(slots) * (channels) * (format))

/* Its first PD_FRAME_HEAD bytes are the head of the message, in the order of the wire. */
struct pd_frame {
    uint16_t kind; /* PD_FRAME_KIND */
    uint16_t flags;
    uint32_t stream;
    uint32_t sequence;
    uint8_t channels;
    uint8_t format; /* bytes per sample: 2, 3 or 4 */
    uint16_t slots;
    uint64_t index;  /* of the first sample */
    uint64_t clock;  /* board clock at the first sample */
    uint16_t filled; /* of the slots */
    uint16_t reserved;
};

/* Write one sample as the wire packs it: little-endian, `format` bytes. */
void pd_sample_pack(int32_t sample, uint8_t format, uint8_t *out);

/* Write a frame into out and return its length on the wire, 0 if size is too small.
 * payload: filled * channels * format packed bytes; the slots left are sent as zero. */
size_t pd_frame_encode(const struct pd_frame *frame, const uint8_t *payload, uint8_t *out,
                       size_t size);

#endif
