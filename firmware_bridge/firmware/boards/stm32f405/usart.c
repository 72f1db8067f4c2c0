#include "usart.h"

#include "byte_queue.h"
#include "clocks.h"
#include "cortex_m.h"

/* RM0090, 8.4 (GPIO) and 30.6 (USART). */
#define GPIOA_MODER REGISTER(0x40020000u)
#define GPIOA_AFRL REGISTER(0x40020020u)
#define USART2_SR REGISTER(0x40004400u)
#define USART2_DR REGISTER(0x40004404u)
#define USART2_BRR REGISTER(0x40004408u)
#define USART2_CR1 REGISTER(0x4000440Cu)

enum {
    BAUD = 1000000, /* divides 42 MHz exactly; two channels of 16 bits at 20 kHz take 0.8 of it */
    IS_EMPTY = 1 << 7,
    HAS_BYTE = 1 << 5,
    CONTROL = 1 << 13 | 1 << 5 | 1 << 3 | 1 << 2, /* on, interrupt on a byte, both ways */
    INTERRUPT = 38
};

static struct byte_queue received;

void usart_init(void)
{
    GPIOA_MODER = (GPIOA_MODER & ~(15u << 4)) | 10u << 4; /* PA2, PA3: alternate function ... */
    GPIOA_AFRL = (GPIOA_AFRL & ~(255u << 8)) | 0x77u << 8; /* ... number 7 */
    USART2_BRR = APB1_HZ / BAUD;
    USART2_CR1 = CONTROL;
    interrupt_enable(INTERRUPT);
}

bool usart_read(uint8_t *byte)
{
    return byte_queue_take(&received, byte);
}

void usart_write(const uint8_t *data, size_t count)
{
    for (size_t k = 0; k < count; k++) {
        while ((USART2_SR & IS_EMPTY) == 0) {
        }
        USART2_DR = data[k];
    }
}

void usart_received(void)
{
    /* Reading the data clears an overrun too; the lost byte shows in its command's CRC. */
    while ((USART2_SR & HAS_BYTE) != 0) {
        byte_queue_put(&received, (uint8_t)(USART2_DR & 0xFFu));
    }
}
