#include "frame.h"

void pd_sample_pack(int32_t sample, uint8_t format, uint8_t *out)
{
    uint32_t bits = (uint32_t)sample;

    for (uint32_t k = 0; k < format; k++) {
        out[k] = (uint8_t)(bits & 0xFFu);
        bits >>= 8;
    }
}

/* No padding before its end: else the array's length is negative. */
typedef char pd_frame_is_as_on_the_wire[offsetof(struct pd_frame, reserved) == PD_FRAME_HEAD - 2 ? 1
                                                                                             : -1];

size_t pd_frame_encode(const struct pd_frame *frame, const uint8_t *payload, uint8_t *out,
                       size_t size)
{
    const size_t scan = (size_t)frame->channels * frame->format;
    const size_t room = frame->slots * scan;
    const size_t used = frame->filled * scan;
    struct pd_envelope envelope;

    pd_envelope_open(&envelope, out, size);
    pd_put(&envelope, frame, PD_FRAME_HEAD);
    pd_put(&envelope, payload, used);
    for (size_t k = used; k < room; k++) {
        pd_put_byte(&envelope, 0);
    }
    return pd_envelope_close(&envelope);
}
