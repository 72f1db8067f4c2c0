/* The envelope of a message: CRC-32 behind it, COBS around it, a zero byte on both sides.
 * Bytes are stuffed as they are put; nothing is buffered but the caller's output. */
#ifndef PD_ENVELOPE_H
#define PD_ENVELOPE_H

#include <stddef.h>
#include <stdint.h>

#if defined __BYTE_ORDER__ && __BYTE_ORDER__ != __ORDER_LITTLE_ENDIAN__
#error "structures go onto the wire as they lie in memory: this core needs a little-endian processor"
#endif

/* Room that a message of n bytes (its CRC not counted) needs on the wire, at most. */
#define PD_WRAPPED_MAX(n) ((n) + 4u + ((n) + 4u) / 254u + 1u + 2u)

struct pd_envelope {
    uint8_t *out;
    size_t size;
    size_t at;      /* bytes so far, counted on where there is no room */
    size_t code_at; /* where the code byte of the present run goes */
    size_t count; /* bytes of the content so far */
    uint32_t crc;
    uint8_t run; /* bytes of the present run */
};

void pd_envelope_open(struct pd_envelope *envelope, uint8_t *out, size_t size);

/* Put the head of every message but samples: type, version, length of the body. */
void pd_envelope_head(struct pd_envelope *envelope, uint8_t type, uint16_t body);

void pd_put_byte(struct pd_envelope *envelope, uint8_t byte);

/* Put memory as it is: every processor this is for has the byte order of the wire. */
void pd_put(struct pd_envelope *envelope, const void *data, size_t count);

/* Return the number of bytes written, 0 if the output was too small for them. */
size_t pd_envelope_close(struct pd_envelope *envelope);

#endif
