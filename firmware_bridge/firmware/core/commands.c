#include "commands.h"

#include "text.h"
#include "wire.h"

enum {
    FRAMES_PER_S = 4 /* or more: no sample waits longer than this for its frame */
};

void pd_device_take_rate(struct pd_device *device, const struct pd_rate *rate)
{
    const uint32_t even = rate->numerator / rate->denominator / FRAMES_PER_S;
    const uint32_t most = device->board->slots_max;

    device->rate.numerator = rate->numerator;
    device->rate.denominator = rate->denominator;
    device->slots = (uint16_t)(even < 1 ? 1 : even > most ? most : even);
    pd_drive_rate(&device->drive, rate);
}

/* The commands: each returns NULL or why it is refused. */

/* Sums of the largest samples must fit 64 bits: format, carrier and length have 63 together. */
static bool can_lock_in(const struct pd_device *device, uint8_t channel, uint32_t length)
{
    const uint32_t bits = 50u - 8u * device->board->identity.format;

    return length > 0 && channel < device->board->identity.channel_count &&
           (bits >= 32u || length >> bits == 0);
}

static const char *start(struct pd_device *device, const struct pd_command *command)
{
    const bool is_plain = command->length == 0;
    const uint8_t sends =
        is_plain ? PD_SEND_SAMPLES : (uint8_t)(command->arguments[0] & 0xFFu);
    const uint8_t channel = (uint8_t)(command->arguments[0] >> 8 & 0xFFu);
    const uint32_t length = (sends & PD_SEND_LOCK_IN) != 0 ? command->arguments[1] : 0;

    if (device->sends != 0) {
        return is_plain ? NULL : "stop first";
    }
    if (sends == 0 || sends > (PD_SEND_SAMPLES | PD_SEND_LOCK_IN) ||
        ((sends & PD_SEND_LOCK_IN) != 0 && !can_lock_in(device, channel, length))) {
        return "no such start";
    }
    device->index = 0;
    device->stream++;
    device->sends = sends;
    pd_drive_restart(&device->drive);
    pd_lock_in_begin(&device->lock_in, channel, length);
    pd_ring_begin(&device->ring, device->stream, device->slots);
    return NULL;
}

static const char *stop(struct pd_device *device)
{
    device->sends = 0;
    device->lock_in.is_on = false;
    pd_ring_publish(&device->ring);
    return NULL;
}

static const char *set_rate(struct pd_device *device, const uint32_t *arguments)
{
    struct pd_rate rate = {arguments[0], arguments[1]};

    if (device->sends != 0) {
        return "stop first";
    }
    if (rate.numerator == 0 || rate.denominator == 0 || !device->board->set_rate(&rate)) {
        return "no such rate";
    }
    pd_device_take_rate(device, &rate);
    return NULL;
}

static const char *change_lines(struct pd_device *device, const struct pd_command *command)
{
    const uint32_t *arguments = command->arguments;
    const uint8_t line = (uint8_t)(arguments[0] & 0xFFu);
    struct pd_line wanted;
    const char *refusal;

    if (command->code == PD_CLEAR_LINE) {
        refusal = pd_drive_clear_line(&device->drive, line);
    } else {
        wanted.amplitude = (uint16_t)(arguments[0] >> 16);
        wanted.step = arguments[1];
        wanted.phase = arguments[2];
        wanted.turn = wanted.step * (uint32_t)(device->index & 0xFFFFFFFFu);
        refusal = pd_drive_set_line(&device->drive, line, &wanted);
    }
    if (refusal == NULL) {
        device->lock_in.is_done = false; /* the result that waits is one of other lines */
        pd_lock_in_restart(&device->lock_in, device->index);
    }
    return refusal;
}

static bool has_its_length(const struct pd_command *command)
{
    static const uint8_t lengths[PD_KEEP_ALIVE] = {0, 8, 0, 8, 12, 4, 8, 0};

    return command->length == lengths[command->code - 1] ||
           (command->code == PD_START && command->length == 0);
}

static bool is_known(const struct pd_command *command)
{
    return command->code >= PD_IDENTIFY && command->code <= PD_KEEP_ALIVE;
}

const char *pd_device_obey(struct pd_device *device, const struct pd_command *command)
{
    pd_drive_heard(&device->drive);
    if (!is_known(command)) {
        return "unknown command";
    }
    if (!has_its_length(command)) {
        return "wrong length";
    }
    switch (command->code) {
    case PD_START:
        return start(device, command);
    case PD_STOP:
        return stop(device);
    case PD_RATE:
        return set_rate(device, command->arguments);
    case PD_SET_LINE:
    case PD_CLEAR_LINE:
        return change_lines(device, command);
    case PD_RAMP:
        return pd_drive_ramp(&device->drive, (int16_t)(command->arguments[0] & 0xFFFFu),
                             command->arguments[1]);
    default:
        return NULL;
    }
}

static bool is_announced_after(uint8_t code)
{
    return code == PD_IDENTIFY || code == PD_START || code == PD_RATE;
}

size_t pd_device_answer(const struct pd_device *device, const struct pd_command *command,
                        const char *refusal, uint8_t *out, size_t size)
{
    const uint8_t code = command->code;
    uint8_t status = is_known(command) ? PD_REFUSED : PD_UNKNOWN;
    size_t length = 0;

    if (refusal == NULL) {
        refusal = "";
        status = PD_DONE;
        if (is_announced_after(code)) {
            length = pd_announcement_encode(&device->board->identity, device->stream,
                                            &device->rate, device->slots, out, size);
        }
        if (code == PD_IDENTIFY || code == PD_KEEP_ALIVE) {
            return length; /* these have no reply of their own */
        }
    }
    return length +
           pd_reply_encode(command->request, code, status, refusal, out + length, size - length);
}
