/* Bytes on their way from the receiving interrupt to the main loop. */
#ifndef BYTE_QUEUE_H
#define BYTE_QUEUE_H

#include <stdbool.h>
#include <stdint.h>

struct byte_queue {
    volatile uint8_t in; /* both count modulo 256, which is its size */
    volatile uint8_t out;
    volatile uint8_t bytes[256];
};

/* In the interrupt; a byte that finds no room is lost, and its command with it. */
void byte_queue_put(struct byte_queue *queue, uint8_t byte);

/* In the main loop: return false if there is none. */
bool byte_queue_take(struct byte_queue *queue, uint8_t *byte);

#endif
