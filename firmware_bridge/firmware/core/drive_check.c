#include "drive_check.h"

#include <stddef.h>

enum {
    UNITY = 65536
};

/* Return value (in 2^-16 of full scale, within one of it) as codes beside rest, rounded down. */
static int32_t codes_of(const struct pd_drive *drive, int32_t value)
{
    return value * (int32_t)drive->limits->span / UNITY;
}

static const char *check_range(const struct pd_drive *drive, int32_t amplitudes)
{
    const struct pd_drive_limits *limits = drive->limits;
    const int32_t from = drive->offset / 16384;
    const int32_t to = drive->ramp.target / 16384;
    const int32_t up = (from > to ? from : to) + amplitudes;
    const int32_t down = (from < to ? from : to) - amplitudes;

    if (up > UNITY || down < -UNITY || limits->rest + codes_of(drive, up) > limits->high ||
        limits->rest + codes_of(drive, down) < limits->low) {
        return "out of range";
    }
    return NULL;
}

/* Steepest slope: 2 pi times amplitude times step, and the ramp; with 202/32 for 2 pi and two codes
 * of rounding it is never taken for less than it is. */
static const char *check_slew(const struct pd_drive *drive, uint32_t slope)
{
    const uint32_t span = drive->limits->span;
    uint32_t codes = ((slope >> 16) + 1u) * span / 256u * 202u / 8192u + 2u;

    if (drive->ramp.left > 0) {
        codes += (drive->ramp.step >> 15) * span / 32768u;
    }
    return codes > drive->limits->slew ? "too fast" : NULL;
}

const char *pd_drive_check(const struct pd_drive *drive)
{
    uint32_t amplitudes = 0;
    uint32_t slope = 0;
    const char *refusal;

    for (uint32_t k = 0; k < PD_LINES; k++) {
        const struct pd_line *line = &drive->lines[k];

        amplitudes += line->amplitude;
        /* No more than 2^31 as long as the amplitudes are within full scale. */
        slope += (uint32_t)line->amplitude * (line->step >> 16);
    }
    if (drive->gain < PD_GAIN_ONE) {
        return "going to rest";
    }
    refusal = check_range(drive, (int32_t)amplitudes);
    return refusal != NULL ? refusal : check_slew(drive, slope);
}
