#include "lock_in.h"

#include "envelope.h"
#include "sine.h"
#include "wire.h"

enum {
    FIXED_WORDS = 5,
    LINE_WORDS = 5
};

static void clear(struct pd_lock_in *lock_in)
{
    int64_t(*sums)[2] = lock_in->sums[lock_in->active];

    lock_in->count = 0;
    for (uint32_t k = 0; k < PD_LINES; k++) {
        sums[k][PD_COSINE] = 0;
        sums[k][PD_SINE] = 0;
    }
}

void pd_lock_in_begin(struct pd_lock_in *lock_in, uint8_t channel, uint32_t length)
{
    lock_in->active = 0;
    lock_in->channel = channel;
    lock_in->length = length;
    lock_in->is_on = length > 0;
    lock_in->is_done = false;
    pd_lock_in_restart(lock_in, 0);
}

void pd_lock_in_restart(struct pd_lock_in *lock_in, uint64_t index)
{
    lock_in->index = index;
    clear(lock_in);
}

/* Add sample times carrier, by products of 16 bits each, which every Cortex-M has in hardware. */
static void add(int64_t *sum, int32_t sample, uint32_t phase)
{
    const int32_t carrier = pd_sin(phase);
    const int32_t low = (int32_t)((uint32_t)sample & 0xFFFFu);
    const int32_t high = (sample - low) / 65536;

    *sum += (int64_t)(high * carrier) * 65536 + low * carrier;
}

static void finish(struct pd_lock_in *lock_in)
{
    if (!lock_in->is_done) {
        lock_in->active ^= 1u;
        lock_in->done_index = lock_in->index;
        lock_in->is_done = true;
    }
    lock_in->index += lock_in->length;
    clear(lock_in);
}

void pd_lock_in_push(struct pd_lock_in *lock_in, const struct pd_line *lines, int32_t sample)
{
    int64_t(*sums)[2] = lock_in->sums[lock_in->active];

    if (!lock_in->is_on) {
        return;
    }
    for (uint32_t k = 0; k < PD_LINES; k++) {
        if (lines[k].step != 0) {
            add(&sums[k][PD_COSINE], sample, lines[k].turn + 0x40000000u);
            add(&sums[k][PD_SINE], sample, lines[k].turn);
        }
    }
    lock_in->count++;
    if (lock_in->count == lock_in->length) {
        finish(lock_in);
    }
}

size_t pd_lock_in_encode(struct pd_lock_in *lock_in, const struct pd_line *lines, uint32_t stream,
                         uint8_t *out, size_t size)
{
    uint32_t words[FIXED_WORDS] = {stream, (uint32_t)(lock_in->done_index & 0xFFFFFFFFu),
                                   (uint32_t)(lock_in->done_index >> 32), lock_in->length,
                                   lock_in->channel | (uint32_t)PD_CARRIER_SHIFT << 8};
    int64_t(*const sums)[2] = lock_in->sums[lock_in->active ^ 1u];
    struct pd_envelope envelope;
    uint32_t steps[PD_LINES];
    uint32_t count = 0;

    if (!lock_in->is_done) {
        return 0;
    }
    /* Read once: the drive may go to rest in the interrupt, and clear its lines, at any time. */
    for (uint32_t k = 0; k < PD_LINES; k++) {
        steps[k] = lines[k].step;
        count += steps[k] != 0;
    }
    words[FIXED_WORDS - 1] |= count << 16;
    pd_envelope_open(&envelope, out, size);
    pd_envelope_head(&envelope, PD_LOCK_IN, (uint16_t)(4 * (FIXED_WORDS + LINE_WORDS * count)));
    pd_put(&envelope, words, sizeof words);
    for (uint32_t k = 0; k < PD_LINES; k++) {
        if (steps[k] != 0) {
            pd_put(&envelope, &steps[k], sizeof steps[k]);
            pd_put(&envelope, sums[k], sizeof sums[k]);
        }
    }
    lock_in->is_done = false;
    return pd_envelope_close(&envelope);
}
