/* UART 0 of the MPS2. */
#ifndef UART_H
#define UART_H

#include <stdbool.h>
#include <stddef.h>
#include <stdint.h>

void uart_init(void);
bool uart_read(uint8_t *byte);
void uart_write(const uint8_t *data, size_t count);

/* Interrupt handler. */
void uart_received(void);

#endif
