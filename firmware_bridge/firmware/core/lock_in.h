/* The lock-in: sums of one channel times the carriers of the drive's lines, in integers. */
#ifndef PD_LOCK_IN_H
#define PD_LOCK_IN_H

#include <stdbool.h>
#include <stddef.h>
#include <stdint.h>

#include "drive.h"

enum {
    PD_COSINE,
    PD_SINE
};

/* Bytes first: on a Cortex-M0+ only the first 32 bytes of a struct are at hand as bytes. */
struct pd_lock_in {
    uint8_t channel;
    uint8_t active; /* which sums are being accumulated; the others may wait to be sent */
    bool is_on;
    volatile bool is_done; /* a result waits to be sent */
    uint32_t length;
    uint32_t count;
    uint64_t index; /* first sample of what is being accumulated */
    uint64_t done_index;
    int64_t sums[2][PD_LINES][2];
};

/* Accumulate over length samples of one channel, again and again, from index 0; length 0: do not. */
void pd_lock_in_begin(struct pd_lock_in *lock_in, uint8_t channel, uint32_t length);

/* Begin anew at this sample; a result that waits is still sent. */
void pd_lock_in_restart(struct pd_lock_in *lock_in, uint64_t index);

/* Take the present sample; a result that waits longer than the next one takes is kept, the
 * next one lost: its index says so. */
void pd_lock_in_push(struct pd_lock_in *lock_in, const struct pd_line *lines, int32_t sample);

/* Write the result that waits; return its length, 0 if there is none. */
size_t pd_lock_in_encode(struct pd_lock_in *lock_in, const struct pd_line *lines, uint32_t stream,
                         uint8_t *out, size_t size);

#endif
