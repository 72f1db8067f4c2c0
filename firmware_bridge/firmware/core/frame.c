#include "frame.h"

#include "wire.h"

void pd_sample_pack(int32_t sample, uint8_t format, uint8_t *out)
{
    uint32_t bits = (uint32_t)sample;

    for (uint32_t k = 0; k < format; k++) {
        out[k] = (uint8_t)(bits & 0xFFu);
        bits >>= 8;
    }
}

static void put_header(struct pd_envelope *envelope, const struct pd_frame *frame)
{
    const uint32_t words[PD_FRAME_HEAD / 4] = {
        PD_SAMPLES | (uint32_t)PD_WIRE_VERSION << 8 | (uint32_t)frame->flags << 16,
        frame->stream,
        frame->sequence,
        frame->channels | (uint32_t)frame->format << 8 | (uint32_t)frame->slots << 16,
        (uint32_t)(frame->index & 0xFFFFFFFFu),
        (uint32_t)(frame->index >> 32),
        (uint32_t)(frame->clock & 0xFFFFFFFFu),
        (uint32_t)(frame->clock >> 32),
        frame->filled};

    pd_put_words(envelope, words, PD_FRAME_HEAD / 4);
}

size_t pd_frame_encode(const struct pd_frame *frame, const uint8_t *payload, uint8_t *out,
                       size_t size)
{
    const size_t scan = (size_t)frame->channels * frame->format;
    const size_t room = frame->slots * scan;
    const size_t used = frame->filled * scan;
    struct pd_envelope envelope;

    pd_envelope_open(&envelope, out, size);
    put_header(&envelope, frame);
    pd_put_bytes(&envelope, payload, used);
    for (size_t k = used; k < room; k++) {
        pd_put_byte(&envelope, 0);
    }
    return pd_envelope_close(&envelope);
}
