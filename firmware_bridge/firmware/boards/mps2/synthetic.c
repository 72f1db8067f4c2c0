#include "synthetic.h"

#include "sine.h"

static uint32_t state = 2463534242u;
static uint32_t phase;
static int32_t before;

/* Xorshift with the shifts 13, 17, 5 (G. Marsaglia, Journal of Statistical Software 8 (2003) 14). */
static uint32_t next_random(void)
{
    state ^= state << 13;
    state ^= state >> 17;
    state ^= state << 5;
    return state;
}

/* The sum of two uniform numbers: triangular, from -8 to 7, standard deviation 3.3 codes. */
static int32_t noise(void)
{
    const uint32_t bits = next_random();

    return (int32_t)(bits >> 29) + (int32_t)(bits >> 8 & 7u) - 7;
}

/* Return numerator / 2^shift to the nearest; cutting towards zero would bend small signals. */
static int32_t rounded(int32_t numerator, uint32_t shift)
{
    const uint32_t biased = (uint32_t)numerator + 0x80000000u + (1u << shift >> 1);

    return (int32_t)(biased >> shift) - (int32_t)(0x80000000u >> shift);
}

int32_t synthetic_sample(int32_t drive)
{
    const int32_t line = rounded(pd_cos(phase) * 300, 14);
    const int32_t sample = rounded(before, 2) + line + noise();

    phase += 3u << 26;
    before = drive;
    return sample;
}
