#include "uart.h"

#include "byte_queue.h"
#include "cortex_m.h"

/* Cortex-M System Design Kit (ARM DDI 0479), APB UART. */
#define UART_DATA REGISTER(0x40004000u)
#define UART_STATE REGISTER(0x40004004u)
#define UART_CONTROL REGISTER(0x40004008u)
#define UART_CLEAR REGISTER(0x4000400Cu)
#define UART_DIVIDER REGISTER(0x40004010u)

enum {
    IS_FULL = 1,    /* the transmitter */
    HAS_BYTE = 2,   /* the receiver */
    CONTROL = 11,   /* both on, interrupt when a byte comes */
    RECEIVED = 2,   /* that interrupt */
    INTERRUPT = 0,  /* its number */
    LEAST = 16      /* the least divider: as fast as it goes */
};

static struct byte_queue received;

void uart_init(void)
{
    UART_DIVIDER = LEAST;
    UART_CONTROL = CONTROL;
    interrupt_enable(INTERRUPT);
}

bool uart_read(uint8_t *byte)
{
    return byte_queue_take(&received, byte);
}

void uart_write(const uint8_t *data, size_t count)
{
    for (size_t k = 0; k < count; k++) {
        while ((UART_STATE & IS_FULL) != 0) {
        }
        UART_DATA = data[k];
    }
}

void uart_received(void)
{
    UART_CLEAR = RECEIVED;
    while ((UART_STATE & HAS_BYTE) != 0) {
        byte_queue_put(&received, (uint8_t)(UART_DATA & 0xFFu));
    }
}
