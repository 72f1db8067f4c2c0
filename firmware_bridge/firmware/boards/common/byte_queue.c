#include "byte_queue.h"

void byte_queue_put(struct byte_queue *queue, uint8_t byte)
{
    const uint8_t place = queue->in;
    const uint8_t after = (uint8_t)(place + 1u);

    if (after != queue->out) {
        queue->bytes[place] = byte;
        queue->in = after;
    }
}

bool byte_queue_take(struct byte_queue *queue, uint8_t *byte)
{
    const uint8_t place = queue->out;

    if (place == queue->in) {
        return false;
    }
    *byte = queue->bytes[place];
    queue->out = (uint8_t)(place + 1u);
    return true;
}
