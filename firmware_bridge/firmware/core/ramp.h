/* The way of the drive's offset to a target: straight, and exact to the last sample. */
#ifndef PD_RAMP_H
#define PD_RAMP_H

#include <stdint.h>

/* step per sample, and one more in `rest` of `length` samples, evenly spread. */
struct pd_ramp {
    int32_t target;
    uint32_t length;
    uint32_t left; /* samples to go */
    uint32_t step;
    uint32_t rest;
    uint32_t carry;
};

/* samples: 1 or more. */
void pd_ramp_aim(struct pd_ramp *ramp, int32_t from, int32_t target, uint32_t samples);

/* Return what follows a value on the way. */
int32_t pd_ramp_after(struct pd_ramp *ramp, int32_t value);

#endif
