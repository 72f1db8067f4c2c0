/* The life of a board outside its sampling interrupt: the same on every board. */
#ifndef SERVE_H
#define SERVE_H

#include <stdbool.h>
#include <stddef.h>
#include <stdint.h>

#include "device.h"

/* What a board's own files supply. */

/* Take the next byte from the host, if there is one. */
bool board_read(uint8_t *byte);

/* Send bytes to the host and wait until they are on their way. */
void board_write(const uint8_t *data, size_t count);

/* There is nothing to do before the next interrupt. */
void board_wait(void);

/* Obey, answer, send, wait; out must have room for the longest message and its envelope. */
void serve(struct pd_device *device, uint8_t *out, size_t size);

#endif
