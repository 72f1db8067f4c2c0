#include "envelope.h"

#include "crc.h"
#include "wire.h"

/* Longest run behind one code byte (Cheshire and Baker 1999). */
enum {
    RUN_MAX = 254
};

static void emit(struct pd_envelope *envelope, uint8_t byte)
{
    if (envelope->at < envelope->size) {
        envelope->out[envelope->at] = byte;
    }
    envelope->at++;
}

static void open_run(struct pd_envelope *envelope)
{
    envelope->code_at = envelope->at;
    envelope->run = 0;
    emit(envelope, 0);
}

static void close_run(struct pd_envelope *envelope)
{
    if (envelope->code_at < envelope->size) {
        envelope->out[envelope->code_at] = (uint8_t)(envelope->run + 1u);
    }
}

static void stuff(struct pd_envelope *envelope, uint8_t byte)
{
    /* A full run is closed only when a byte follows it: a last one needs no further code byte. */
    if (envelope->run == RUN_MAX) {
        close_run(envelope);
        open_run(envelope);
    }
    if (byte == 0) {
        close_run(envelope);
        open_run(envelope);
    } else {
        emit(envelope, byte);
        envelope->run++;
    }
}

void pd_envelope_open(struct pd_envelope *envelope, uint8_t *out, size_t size)
{
    envelope->out = out;
    envelope->size = size;
    envelope->at = 0;
    envelope->count = 0;
    envelope->crc = PD_CRC_START;
    emit(envelope, 0);
    open_run(envelope);
}

void pd_envelope_head(struct pd_envelope *envelope, uint8_t type, uint16_t body)
{
    const uint32_t head = type | (uint32_t)PD_WIRE_VERSION << 8 | (uint32_t)body << 16;

    pd_put(envelope, &head, sizeof head);
}

void pd_put_byte(struct pd_envelope *envelope, uint8_t byte)
{
    envelope->count++;
    envelope->crc = pd_crc_push(envelope->crc, byte);
    stuff(envelope, byte);
}

void pd_put(struct pd_envelope *envelope, const void *data, size_t count)
{
    const uint8_t *bytes = data;

    for (size_t k = 0; k < count; k++) {
        pd_put_byte(envelope, bytes[k]);
    }
}

size_t pd_envelope_close(struct pd_envelope *envelope)
{
    const uint32_t crc = envelope->crc ^ 0xFFFFFFFFu;

    pd_put(envelope, &crc, sizeof crc);
    close_run(envelope);
    emit(envelope, 0);
    return envelope->at <= envelope->size ? envelope->at : 0;
}
