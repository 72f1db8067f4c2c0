#include "announcement.h"

#include "envelope.h"
#include "text.h"
#include "wire.h"

enum {
    FIXED_WORDS = 10
};

static void put_text(struct pd_envelope *envelope, const char *text)
{
    const size_t length = pd_text_length(text, 255);

    pd_put_byte(envelope, (uint8_t)length);
    pd_put(envelope, text, length);
}

static void put_channel(struct pd_envelope *envelope, const struct pd_channel *channel)
{
    pd_put(envelope, &channel->range, sizeof channel->range);
    put_text(envelope, channel->name);
    put_text(envelope, channel->unit);
}

static void put_body(struct pd_envelope *envelope, const struct pd_identity *identity,
                     const uint32_t *words)
{
    pd_put(envelope, words, 4 * FIXED_WORDS);
    put_text(envelope, identity->board);
    put_text(envelope, identity->firmware);
    for (uint32_t k = 0; k < identity->channel_count; k++) {
        put_channel(envelope, &identity->channels[k]);
    }
}

size_t pd_announcement_encode(const struct pd_identity *identity, uint32_t stream,
                              const struct pd_rate *rate, uint16_t slots, uint8_t *out,
                              size_t size)
{
    const uint32_t words[FIXED_WORDS] = {
        stream,
        rate->numerator,
        0,
        rate->denominator,
        0,
        identity->clock_hz,
        0,
        0x3FF00000u, /* its clock runs in real time: 1.0 as a double */
        (identity->is_simulated ? 1u : 0u) | (uint32_t)identity->format << 16 |
            (uint32_t)identity->channel_count << 24,
        slots};
    struct pd_envelope envelope;
    uint16_t body = 0;

    /* Written twice: the first time for the length of its body, which stands in its head. */
    for (uint32_t pass = 0; pass < 2; pass++) {
        pd_envelope_open(&envelope, out, size);
        pd_envelope_head(&envelope, PD_ANNOUNCEMENT, body);
        put_body(&envelope, identity, words);
        body = (uint16_t)(envelope.count - 4u);
    }
    return pd_envelope_close(&envelope);
}
