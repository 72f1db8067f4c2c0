/* Two ADCs that sample at the same moment, the timer that tells them when, and the DAC.
 * PA0: photodiode. PA1: drive, read back. PA4: the DAC. All 0 to 3.3 V, 12 bits. */
#ifndef CONVERTERS_H
#define CONVERTERS_H

#include <stdint.h>

/* The DAC at this code, the ADCs waiting for their timer. */
void converters_init(uint16_t dac_code);

/* Sample every so many ticks of TIMER_HZ. */
void converters_run(uint32_t ticks);

void dac_write(uint16_t code);

/* In the interrupt: both codes, PA0 in the lower half. */
uint32_t converters_read(void);

/* Conversions begun so far, counted by the hardware: none is overlooked, however late we are. */
uint32_t converters_count(void);

#endif
