/* The clocks of an STM32F405 or F407 with a crystal of 8 MHz. */
#ifndef CLOCKS_H
#define CLOCKS_H

enum {
    CRYSTAL_HZ = 8000000,
    CORE_HZ = 168000000,
    APB1_HZ = 42000000,  /* USART 2, DAC */
    TIMER_HZ = 84000000  /* timers on APB1 */
};

/* A crystal, because the chip's own oscillator is wrong by up to 1 %: what a fitted line loses to a
 * clock that is off, no later step brings back. */
void clocks_init(void);

#endif
