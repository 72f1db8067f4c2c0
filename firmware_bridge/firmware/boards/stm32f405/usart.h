/* USART 2 on PA2 (to the host) and PA3 (from it), 1 Mbaud, 8N1. */
#ifndef USART_H
#define USART_H

#include <stdbool.h>
#include <stddef.h>
#include <stdint.h>

void usart_init(void);
bool usart_read(uint8_t *byte);
void usart_write(const uint8_t *data, size_t count);

/* Interrupt handler. */
void usart_received(void);

#endif
