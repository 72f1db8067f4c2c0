/* What a board says about itself. */
#ifndef PD_ANNOUNCEMENT_H
#define PD_ANNOUNCEMENT_H

#include <stdbool.h>
#include <stddef.h>
#include <stdint.h>

/* Bits of an IEEE 754 double, for a core without floating point. */
#define PD_F64_ZERO UINT64_C(0)

/* Samples per second and channel, exactly. */
struct pd_rate {
    uint32_t numerator;
    uint32_t denominator;
};

/* Value in unit = counts * scale + offset; in the order of the wire, without padding. */
struct pd_range {
    uint64_t scale_f64;
    uint64_t offset_f64;
    int32_t low; /* codes at the ends of the converter's range */
    int32_t high;
};

struct pd_channel {
    const char *name; /* UTF-8, at most 255 bytes, as every text here */
    const char *unit;
    struct pd_range range;
};

/* What never changes while the board runs. */
struct pd_identity {
    const char *board;
    const char *firmware;
    const struct pd_channel *channels;
    uint8_t channel_count;
    uint8_t format; /* bytes per sample: 2, 3 or 4 */
    bool is_simulated;
    uint32_t clock_hz; /* ticks per second of the clock in the frames, 0 without one */
};

/* Write the announcement of one stream; return its length on the wire, 0 if size is too small. */
size_t pd_announcement_encode(const struct pd_identity *identity, uint32_t stream,
                              const struct pd_rate *rate, uint16_t slots, uint8_t *out,
                              size_t size);

#endif
