/* Text on the wire: replies and notes for people. */
#ifndef PD_TEXT_H
#define PD_TEXT_H

#include <stddef.h>
#include <stdint.h>

enum {
    PD_TEXT_MAX = 1024
};

/* Bytes before the closing zero, at most maximum of them. */
size_t pd_text_length(const char *text, size_t maximum);

/* Write the answer to a command; return its length on the wire, 0 if size is too small. */
size_t pd_reply_encode(uint16_t request, uint8_t code, uint8_t status, const char *text,
                       uint8_t *out, size_t size);

/* Write a note; return its length on the wire, 0 if size is too small. */
size_t pd_note_encode(const char *text, uint8_t *out, size_t size);

#endif
