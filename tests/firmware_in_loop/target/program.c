/* The core on the emulated target: a device plays a script of commands and random samples, and says
 * every message it sends in hex. The test plays the same on the core compiled for its own machine. */
#include "crc.h"
#include "device.h"
#include "script.h" /* written by the test: commands, COMMANDS_AT, TICKS */
#include "semihosting.h"

enum {
    BLOCKS = 3,
    SLOTS = 20,
    CHANNELS = 2,
    FORMAT = 3
};

static const struct pd_channel channels[CHANNELS] = {
    {"pd", "V", {PD_F64_ZERO, PD_F64_ZERO, -8388608, 8388607}},
    {"drive", "V", {PD_F64_ZERO, PD_F64_ZERO, -8388608, 8388607}}};

static bool set_rate(struct pd_rate *rate)
{
    return rate->numerator <= 10000u * rate->denominator;
}

static const struct pd_board board = {{"target", "1.0", channels, CHANNELS, FORMAT, true, 1000},
                                      {2048, 2047, 48, 4048, 1200},
                                      SLOTS,
                                      set_rate};

static struct pd_device device;
static struct pd_frame blocks[BLOCKS];
static uint8_t payload[BLOCKS * SLOTS * CHANNELS * FORMAT];
static uint8_t out[512];
static uint32_t state = 2463534242u;

static int32_t next_sample(void)
{
    state ^= state << 13;
    state ^= state >> 17;
    state ^= state << 5;
    return (int32_t)(state & 0xFFFFFFu) - 0x800000;
}

static void say_message(size_t length)
{
    static const char digits[] = "0123456789abcdef";
    char text[2 * sizeof out + 2];
    size_t at = 0;

    for (size_t k = 0; k < length; k++) {
        text[at++] = digits[out[k] >> 4];
        text[at++] = digits[out[k] & 15u];
    }
    text[at++] = '\n';
    text[at] = '\0';
    if (length > 0) {
        say(text);
    }
}

static void play_script(void)
{
    uint8_t buffer[PD_COMMAND_MAX];
    struct pd_parser parser;
    struct pd_command command;

    pd_parser_init(&parser, buffer, sizeof buffer);
    for (size_t k = 0; k < sizeof commands; k++) {
        if (pd_parser_push(&parser, commands[k], &command)) {
            const char *refusal = pd_device_obey(&device, &command);

            say_message(pd_device_answer(&device, &command, refusal, out, sizeof out));
        }
    }
}

static void play_samples(void)
{
    int32_t scan[CHANNELS];
    size_t length;

    for (uint32_t tick = 0; tick < TICKS; tick++) {
        if (tick == COMMANDS_AT) {
            play_script();
        }
        scan[0] = next_sample();
        scan[1] = (int32_t)pd_device_code(&device) - board.drive.rest;
        pd_device_sample(&device, scan, tick, 0);
        do {
            length = pd_device_next(&device, out, sizeof out);
            say_message(length);
        } while (length > 0);
    }
}

/* Check value of CRC-32/ISO-HDLC. */
static bool crc_is_right(void)
{
    uint32_t crc = PD_CRC_START;

    for (uint8_t byte = '1'; byte <= '9'; byte++) {
        crc = pd_crc_push(crc, byte);
    }
    return (crc ^ 0xFFFFFFFFu) == 0xCBF43926u;
}

int main(void)
{
    const struct pd_rate rate = {1000, 1};

    pd_ring_init(&device.ring, blocks, payload, BLOCKS, SLOTS, CHANNELS, FORMAT);
    pd_device_init(&device, &board, &rate, 6);
    play_samples();
    leave(crc_is_right() ? 0 : 3);
    return 0;
}
