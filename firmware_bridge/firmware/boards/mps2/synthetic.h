/* Samples where there is no converter: a mirror that follows the drive, and noise. */
#ifndef SYNTHETIC_H
#define SYNTHETIC_H

#include <stdint.h>

/* Return the photodiode's code for this sample: a quarter of the drive one sample before, a line
 * of 300 codes at 3/64 of the rate, and noise. drive: codes beside rest. */
int32_t synthetic_sample(int32_t drive);

#endif
