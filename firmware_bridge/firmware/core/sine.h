/* Carriers in integers. */
#ifndef PD_SINE_H
#define PD_SINE_H

#include <stdint.h>

enum {
    PD_CARRIER_SHIFT = 14 /* amplitude 2^14, which 16 bits hold at both ends */
};

/* Return 2^14 sin(2 pi phase / 2^32) within 1.1. */
int32_t pd_sin(uint32_t phase);
int32_t pd_cos(uint32_t phase);

#endif
