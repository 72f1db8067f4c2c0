/* Bytes from the host in, commands out, in the caller's bounded buffer. */
#ifndef PD_PARSER_H
#define PD_PARSER_H

#include <stdbool.h>
#include <stddef.h>
#include <stdint.h>

enum {
    PD_COMMAND_MAX = 64, /* a buffer of this size holds every command of wire version 1 */
    PD_ARGUMENTS = 3     /* words of 32 bits at most */
};

struct pd_parser {
    uint8_t *buffer;
    size_t size;
    size_t at; /* bytes unstuffed so far, counted on where there is no room */
    uint32_t crc;
    uint32_t damaged; /* pieces between delimiters that were no command */
    uint8_t code;     /* of the present run, 0 before the first */
    uint8_t left;     /* bytes of the present run to come */
};

struct pd_command {
    uint32_t arguments[PD_ARGUMENTS]; /* little-endian words; 0 where there are none */
    uint16_t length;                  /* of the arguments in bytes */
    uint16_t request;
    uint8_t code;
};

void pd_parser_init(struct pd_parser *parser, uint8_t *buffer, size_t size);

/* Take one byte; return true if it completes a command, which is then in *command. */
bool pd_parser_push(struct pd_parser *parser, uint8_t byte, struct pd_command *command);

#endif
