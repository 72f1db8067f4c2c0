#include "parser.h"

#include "crc.h"
#include "wire.h"

enum {
    HEAD_BYTES = 4,  /* type, version, length of the body */
    FIXED_BYTES = 4, /* request, code, reserved */
    CRC_BYTES = 4,
    LEAST_BYTES = HEAD_BYTES + FIXED_BYTES + CRC_BYTES
};

static void restart(struct pd_parser *parser)
{
    parser->at = 0;
    parser->crc = PD_CRC_START;
    parser->code = 0;
    parser->left = 0;
}

void pd_parser_init(struct pd_parser *parser, uint8_t *buffer, size_t size)
{
    parser->buffer = buffer;
    parser->size = size;
    parser->damaged = 0;
    restart(parser);
}

static void keep(struct pd_parser *parser, uint8_t byte)
{
    if (parser->at < parser->size) {
        parser->buffer[parser->at] = byte;
    }
    parser->at++;
    parser->crc = pd_crc_push(parser->crc, byte);
}

static void unstuff(struct pd_parser *parser, uint8_t byte)
{
    const uint8_t before = parser->code;

    if (parser->left > 0) {
        parser->left--;
        keep(parser, byte);
        return;
    }
    parser->code = byte;
    parser->left = (uint8_t)(byte - 1u);
    /* Each code byte stands for a zero, but the first one and those behind a full run. */
    if (before != 0 && before != 255) {
        keep(parser, 0);
    }
}

static uint32_t word_at(const uint8_t *data)
{
    return data[0] | (uint32_t)data[1] << 8 | (uint32_t)data[2] << 16 | (uint32_t)data[3] << 24;
}

static bool read_command(const struct pd_parser *parser, struct pd_command *command)
{
    const uint8_t *data = parser->buffer;
    const size_t body = parser->at - HEAD_BYTES - CRC_BYTES;
    uint32_t head;

    if (parser->left > 0 || parser->at < LEAST_BYTES || parser->at > parser->size ||
        parser->crc != PD_CRC_SEALED ||
        word_at(data) != (PD_COMMAND | (uint32_t)PD_WIRE_VERSION << 8 | (uint32_t)body << 16)) {
        return false;
    }
    data += HEAD_BYTES;
    head = word_at(data);
    command->request = (uint16_t)(head & 0xFFFFu);
    command->code = (uint8_t)(head >> 16 & 0xFFu);
    command->length = (uint16_t)(body - FIXED_BYTES);
    for (size_t k = 0; k < PD_ARGUMENTS; k++) {
        data += 4;
        command->arguments[k] = 4 * k + 4 <= command->length ? word_at(data) : 0;
    }
    return true;
}

bool pd_parser_push(struct pd_parser *parser, uint8_t byte, struct pd_command *command)
{
    bool is_complete = false;

    if (byte != 0) {
        unstuff(parser, byte);
        return false;
    }
    if (parser->code != 0) { /* two delimiters in a row are no piece */
        is_complete = read_command(parser, command);
        if (!is_complete) {
            parser->damaged++;
        }
    }
    restart(parser);
    return is_complete;
}
