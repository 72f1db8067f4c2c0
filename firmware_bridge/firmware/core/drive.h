/* The drive: several lines and an offset on one DAC value.
 *
 * Everything is counted in 2^-30 of the full scale: a line's amplitude is at most 65535 / 65536 of
 * it and its carrier has the amplitude 2^14. What the limits could not follow is refused when it
 * is asked for, so that no accepted drive is distorted; the limits still hold whatever happens. */
#ifndef PD_DRIVE_H
#define PD_DRIVE_H

#include <stdbool.h>
#include <stdint.h>

#include "announcement.h"
#include "ramp.h"

enum {
    PD_LINES = 6,
    PD_GAIN_ONE = 32768
};

/* What the DAC and what hangs on it can take, in DAC codes. */
struct pd_drive_limits {
    uint16_t rest; /* at reset and when the host is silent */
    uint16_t span; /* of full scale, beside rest; at most 32767 */
    uint16_t low;
    uint16_t high;
    uint16_t slew; /* per sample */
};

struct pd_line {
    uint32_t step; /* of phase per sample, 2^32 a turn; 0: not set */
    uint32_t turn; /* step times the sample index */
    uint32_t phase;
    uint16_t amplitude; /* in 2^-16 of full scale */
};

struct pd_drive {
    uint16_t gain; /* PD_GAIN_ONE, less while the drive goes to rest */
    uint16_t fall; /* of the gain per sample then */
    uint16_t code;
    const struct pd_drive_limits *limits;
    uint32_t silent; /* samples since the host was heard */
    uint32_t silence;
    int32_t offset;
    struct pd_ramp ramp;
    struct pd_line lines[PD_LINES];
};

/* At rest. */
void pd_drive_init(struct pd_drive *drive, const struct pd_drive_limits *limits);

/* Tell the sample rate, by which 2 s are counted; it must be told once before the first sample. */
void pd_drive_rate(struct pd_drive *drive, const struct pd_rate *rate);

/* Count the phases of all lines from here. */
void pd_drive_restart(struct pd_drive *drive);

/* The host was heard. */
void pd_drive_heard(struct pd_drive *drive);

/* Return the DAC code for the present sample. */
uint16_t pd_drive_code(struct pd_drive *drive);

/* Go on to the next sample. */
void pd_drive_advance(struct pd_drive *drive);

/* The next three change the drive and return NULL, or return why they did not. */

const char *pd_drive_set_line(struct pd_drive *drive, uint8_t line, const struct pd_line *wanted);
const char *pd_drive_clear_line(struct pd_drive *drive, uint8_t line);

/* Take the offset to target / 32768 of full scale in so many samples, evenly. */
const char *pd_drive_ramp(struct pd_drive *drive, int16_t target, uint32_t samples);

#endif
