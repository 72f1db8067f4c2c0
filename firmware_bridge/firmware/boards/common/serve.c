#include "serve.h"

#include "cortex_m.h"
#include "parser.h"

static void obey(struct pd_device *device, const struct pd_command *command, uint8_t *out,
                 size_t size)
{
    const uint32_t before = interrupts_hold();
    const char *refusal = pd_device_obey(device, command);

    interrupts_release(before);
    board_write(out, pd_device_answer(device, command, refusal, out, size));
}

/* One message at a time: a busy link must not keep the host from being heard. */
static void send_next(struct pd_device *device, uint8_t *out, size_t size)
{
    const size_t length = pd_device_next(device, out, size);

    if (length > 0) {
        board_write(out, length);
    } else {
        board_wait();
    }
}

void serve(struct pd_device *device, uint8_t *out, size_t size)
{
    uint8_t buffer[PD_COMMAND_MAX];
    struct pd_parser parser;
    struct pd_command command;
    uint8_t byte;

    pd_parser_init(&parser, buffer, sizeof buffer);
    for (;;) {
        while (board_read(&byte)) {
            if (pd_parser_push(&parser, byte, &command)) {
                obey(device, &command, out, size);
            }
        }
        send_next(device, out, size);
    }
}
