#include "seed.h"

#include "cortex_m.h"

/* RM0090, 5.4 (PWR), 26.6.20 (RTC backup registers), 39.1 (unique device identity). */
#define PWR_CR REGISTER(0x40007000u)
#define BACKUP_0 REGISTER(0x40002850u)
#define IDENTITY(n) REGISTER(0x1FFF7A10u + 4u * (n))
#define UNUSED_MEMORY(n) REGISTER(0x10000000u + 4u * (n))

enum {
    BACKUP_IS_OPEN = 1 << 8,
    WORDS = 1024
};

/* One round of FNV-1a (Fowler, Noll, Vo; RFC draft), on words. */
static uint32_t mix(uint32_t hash, uint32_t word)
{
    return (hash ^ word) * 16777619u;
}

/* A counter that resets do not clear, and memory that nothing has written since power came, in
 * which every power-up leaves other bits. */
uint32_t seed_new(void)
{
    uint32_t hash = 2166136261u;

    PWR_CR |= BACKUP_IS_OPEN;
    BACKUP_0 = BACKUP_0 + 1u;
    hash = mix(hash, BACKUP_0);
    for (uint32_t k = 0; k < 3; k++) {
        hash = mix(hash, IDENTITY(k));
    }
    for (uint32_t k = 0; k < WORDS; k++) {
        hash = mix(hash, UNUSED_MEMORY(k));
    }
    return hash;
}
