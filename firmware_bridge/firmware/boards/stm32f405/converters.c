#include "converters.h"

#include "cortex_m.h"

/* RM0090, 8.4 (GPIO), 13.13 (ADC), 14.5 (DAC), 18.4 (TIM2, TIM5). */
#define GPIOA_MODER REGISTER(0x40020000u)
#define TIM2_CR1 REGISTER(0x40000000u)
#define TIM2_CR2 REGISTER(0x40000004u)
#define TIM2_EGR REGISTER(0x40000014u)
#define TIM2_ARR REGISTER(0x4000002Cu)
#define TIM5_CR1 REGISTER(0x40000C00u)
#define TIM5_SMCR REGISTER(0x40000C08u)
#define TIM5_CNT REGISTER(0x40000C24u)
#define DAC_CR REGISTER(0x40007400u)
#define DAC_DHR12R1 REGISTER(0x40007408u)
#define ADC1_SR REGISTER(0x40012000u)
#define ADC1_CR1 REGISTER(0x40012004u)
#define ADC1_CR2 REGISTER(0x40012008u)
#define ADC1_SMPR2 REGISTER(0x40012010u)
#define ADC1_SQR3 REGISTER(0x40012034u)
#define ADC2_SR REGISTER(0x40012100u)
#define ADC2_CR2 REGISTER(0x40012108u)
#define ADC2_SMPR2 REGISTER(0x40012110u)
#define ADC2_SQR3 REGISTER(0x40012134u)
#define ADC_CCR REGISTER(0x40012304u)
#define ADC_CDR REGISTER(0x40012308u)

enum {
    ADC_ON = 1,
    ADC_INTERRUPT = 1 << 5, /* when a conversion is done */
    SIMULTANEOUS = 6,       /* of the two ADCs' regular channels */
    CLOCK_BY_4 = 1 << 16,   /* 21 MHz, of at most 36 */
    CYCLES_84 = 4,          /* of sampling: 4 us, enough for a source of 50 kilohm */
    DAC_ON = 1 | 1 << 1, /* without its buffer, which does not reach 0 V: 15 kilohm */
    UPDATE_IS_TRIGGER = 2 << 4,
    COUNT = 1,
    BY_TRIGGER = 7, /* number 0, which for TIM5 is the trigger output of TIM2 */
    INTERRUPT = 18
};

#define ON_TIMER_2 (6u << 24 | 1u << 28) /* its trigger output, rising edge */

void converters_init(uint16_t dac_code)
{
    GPIOA_MODER |= 3u << 0 | 3u << 2 | 3u << 8; /* PA0, PA1, PA4: analogue */
    DAC_DHR12R1 = dac_code;
    DAC_CR = DAC_ON;
    ADC_CCR = SIMULTANEOUS | CLOCK_BY_4;
    ADC1_SMPR2 = CYCLES_84;
    ADC2_SMPR2 = CYCLES_84 << 3;
    ADC1_SQR3 = 0; /* channel 0 */
    ADC2_SQR3 = 1; /* channel 1 */
    ADC1_CR1 = ADC_INTERRUPT;
    ADC2_CR2 = ADC_ON;
    ADC1_CR2 = ADC_ON | ON_TIMER_2;
    TIM2_CR2 = UPDATE_IS_TRIGGER;
    TIM5_SMCR = BY_TRIGGER;
    TIM5_CR1 = COUNT;
    interrupt_enable(INTERRUPT);
}

void converters_run(uint32_t ticks)
{
    TIM2_ARR = ticks - 1u;
    TIM2_EGR = 1; /* begin a whole period now */
    TIM2_CR1 = COUNT;
}

void dac_write(uint16_t code)
{
    DAC_DHR12R1 = code;
}

uint32_t converters_read(void)
{
    const uint32_t codes = ADC_CDR;

    ADC1_SR = 0;
    ADC2_SR = 0;
    return codes;
}

uint32_t converters_count(void)
{
    return TIM5_CNT;
}
