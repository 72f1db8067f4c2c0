#include "ring.h"

#include "wire.h"

/* The counters are volatile; this keeps what they guard on its side of them. */
#define BARRIER() __asm__ volatile("" : : : "memory")

void pd_ring_init(struct pd_ring *ring, struct pd_frame *blocks, uint8_t *payload, uint8_t count,
                  uint16_t slots_max, uint8_t channels, uint8_t format)
{
    ring->blocks = blocks;
    ring->payload = payload;
    ring->count = count;
    ring->channels = channels;
    ring->format = format;
    ring->block_bytes = (uint16_t)(slots_max * channels * format);
    ring->dropped = 0;
    ring->in = 0;
    ring->out = 0;
    ring->published = 0;
    ring->taken = 0;
    for (uint32_t k = 0; k < count; k++) {
        blocks[k].filled = 0;
        blocks[k].reserved = 0;
    }
    pd_ring_begin(ring, 0, slots_max);
}

void pd_ring_begin(struct pd_ring *ring, uint32_t stream, uint16_t slots)
{
    pd_ring_publish(ring);
    ring->stream = stream;
    ring->slots = slots;
    ring->sequence = 0;
    ring->is_overrun = false;
}

static uint8_t after(const struct pd_ring *ring, uint8_t place)
{
    return place + 1 == ring->count ? 0 : (uint8_t)(place + 1u);
}

static bool is_full(const struct pd_ring *ring)
{
    return (uint8_t)(ring->published - ring->taken) == ring->count;
}

static void begin_block(struct pd_ring *ring, struct pd_frame *block, uint64_t index,
                        uint64_t clock)
{
    block->kind = PD_FRAME_KIND;
    block->index = index;
    block->clock = clock;
    block->stream = ring->stream;
    block->sequence = ring->sequence++;
    block->flags = ring->is_overrun ? PD_OVERRUN : 0;
    block->slots = ring->slots;
    block->channels = ring->channels;
    block->format = ring->format;
    ring->is_overrun = false;
}

void pd_ring_push(struct pd_ring *ring, const int32_t *scan, uint64_t index, uint64_t clock,
                  uint16_t flags)
{
    struct pd_frame *block = &ring->blocks[ring->in];
    uint8_t *place = ring->payload + (size_t)ring->in * ring->block_bytes;

    if (is_full(ring)) {
        pd_ring_miss(ring);
        return;
    }
    if (block->filled == 0) {
        begin_block(ring, block, index, clock);
    }
    place += (size_t)block->filled * ring->channels * ring->format;
    for (uint32_t k = 0; k < ring->channels; k++) {
        pd_sample_pack(scan[k], ring->format, place);
        place += ring->format;
    }
    block->flags |= flags;
    block->filled++;
    if (block->filled == block->slots) {
        pd_ring_publish(ring);
    }
}

void pd_ring_miss(struct pd_ring *ring)
{
    pd_ring_publish(ring);
    ring->dropped++;
    ring->is_overrun = true;
}

void pd_ring_publish(struct pd_ring *ring)
{
    if (!is_full(ring) && ring->blocks[ring->in].filled > 0) {
        BARRIER();
        ring->published++;
        ring->in = after(ring, ring->in);
    }
}

size_t pd_ring_encode(struct pd_ring *ring, uint8_t *out, size_t size)
{
    struct pd_frame *block = &ring->blocks[ring->out];
    size_t length;

    if (ring->published == ring->taken) {
        return 0;
    }
    BARRIER();
    length =
        pd_frame_encode(block, ring->payload + (size_t)ring->out * ring->block_bytes, out, size);
    block->filled = 0;
    ring->out = after(ring, ring->out);
    BARRIER();
    ring->taken++;
    return length;
}
