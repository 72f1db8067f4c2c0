#include "clocks.h"

#include "cortex_m.h"

/* RM0090, 7.3 (RCC) and 3.9 (flash interface). */
#define RCC_CR REGISTER(0x40023800u)
#define RCC_PLLCFGR REGISTER(0x40023804u)
#define RCC_CFGR REGISTER(0x40023808u)
#define RCC_AHB1ENR REGISTER(0x40023830u)
#define RCC_APB1ENR REGISTER(0x40023840u)
#define RCC_APB2ENR REGISTER(0x40023844u)
#define FLASH_ACR REGISTER(0x40023C00u)

enum {
    FLASH_WAIT = 5, /* states at 168 MHz and 3.3 V */
    CACHES = 7 << 8,
    PLL_M = 8,
    PLL_N = 336, /* and its output divided by 2, which is written as 0 */
    PLL_Q = 7
};

#define PLL_RESERVED (2u << 28) /* as after reset */

#define HSE_ON (1u << 16)
#define HSE_READY (1u << 17)
#define PLL_ON (1u << 24)
#define PLL_READY (1u << 25)
#define FROM_HSE (1u << 22)
#define PRESCALERS (5u << 10 | 4u << 13) /* APB1 by 4, APB2 by 2 */
#define SWITCH_TO_PLL 2u
#define SWITCHED_TO_PLL (2u << 2)

static void wait_for(const volatile uint32_t *status, uint32_t mask, uint32_t wanted)
{
    while ((*status & mask) != wanted) {
    }
}

void clocks_init(void)
{
    RCC_CR |= HSE_ON;
    wait_for(&RCC_CR, HSE_READY, HSE_READY);
    RCC_PLLCFGR =
        PLL_M | PLL_N << 6 | FROM_HSE | (uint32_t)PLL_Q << 24 | PLL_RESERVED;
    RCC_CR |= PLL_ON;
    wait_for(&RCC_CR, PLL_READY, PLL_READY);
    FLASH_ACR = FLASH_WAIT | CACHES;
    RCC_CFGR = PRESCALERS;
    RCC_CFGR = PRESCALERS | SWITCH_TO_PLL;
    wait_for(&RCC_CFGR, 3u << 2, SWITCHED_TO_PLL);
    RCC_AHB1ENR |= 1u << 0;                                   /* GPIO A */
    RCC_APB1ENR |= 1u << 0 | 1u << 3 | 1u << 17 | 1u << 28 | 1u << 29; /* TIM2, 5, USART2, PWR, DAC */
    RCC_APB2ENR |= 1u << 8 | 1u << 9;                         /* ADC1, ADC2 */
}
