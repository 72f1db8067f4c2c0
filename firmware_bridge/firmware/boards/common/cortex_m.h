/* What every Cortex-M has: the system timer, the interrupt controller, waiting and holding. */
#ifndef CORTEX_M_H
#define CORTEX_M_H

#include <stdint.h>

/* A peripheral register. */
#define REGISTER(address) (*(volatile uint32_t *)(uintptr_t)(address))

/* ARMv7-M Architecture Reference Manual, B3.3 and B3.4. */
#define SYSTICK_CONTROL REGISTER(0xE000E010u)
#define SYSTICK_RELOAD REGISTER(0xE000E014u)
#define SYSTICK_VALUE REGISTER(0xE000E018u)
#define NVIC_ENABLE(n) REGISTER(0xE000E100u + 4u * (n))

enum {
    SYSTICK_RUN = 7 /* enabled, with its interrupt, on the processor's clock */
};

typedef void (*handler)(void);

/* Copies .data, clears .bss, calls main(). */
void reset(void);

int main(void);

static inline void interrupt_enable(uint32_t number)
{
    NVIC_ENABLE(number / 32u) = 1u << (number % 32u);
}

static inline uint32_t interrupts_hold(void)
{
    uint32_t before;

    __asm__ volatile("mrs %0, primask\n\tcpsid i" : "=r"(before) : : "memory");
    return before;
}

static inline void interrupts_release(uint32_t before)
{
    __asm__ volatile("msr primask, %0" : : "r"(before) : "memory");
}

static inline void wait_for_interrupt(void)
{
    __asm__ volatile("wfi" : : : "memory");
}

#endif
