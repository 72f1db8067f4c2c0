#include "cortex_m.h"

/* From the linker script. */
extern uint32_t data_source[];
extern uint32_t data_begin[];
extern uint32_t data_end[];
extern uint32_t bss_begin[];
extern uint32_t bss_end[];

void reset(void)
{
    const uint32_t *from = data_source;

    for (uint32_t *to = data_begin; (uintptr_t)to < (uintptr_t)data_end; to++) {
        *to = *from++;
    }
    for (uint32_t *to = bss_begin; (uintptr_t)to < (uintptr_t)bss_end; to++) {
        *to = 0;
    }
    (void)main();
    for (;;) {
        wait_for_interrupt();
    }
}
