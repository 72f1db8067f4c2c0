#include "text.h"

#include "envelope.h"
#include "wire.h"

size_t pd_text_length(const char *text, size_t maximum)
{
    size_t length = 0;

    while (length < maximum && text[length] != '\0') {
        length++;
    }
    return length;
}

/* A message of some words and a text. */
static size_t encode(uint8_t type, const uint32_t *words, size_t count, const char *text,
                     uint8_t *out, size_t size)
{
    const size_t length = pd_text_length(text, PD_TEXT_MAX);
    struct pd_envelope envelope;

    pd_envelope_open(&envelope, out, size);
    pd_envelope_head(&envelope, type, (uint16_t)(4 * count + length));
    pd_put(&envelope, words, 4 * count);
    pd_put(&envelope, text, length);
    return pd_envelope_close(&envelope);
}

size_t pd_reply_encode(uint16_t request, uint8_t code, uint8_t status, const char *text,
                       uint8_t *out, size_t size)
{
    const uint32_t head = request | (uint32_t)code << 16 | (uint32_t)status << 24;

    return encode(PD_REPLY, &head, 1, text, out, size);
}

size_t pd_note_encode(const char *text, uint8_t *out, size_t size)
{
    return encode(PD_NOTE, NULL, 0, text, out, size);
}
