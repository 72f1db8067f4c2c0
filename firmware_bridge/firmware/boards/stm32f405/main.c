/* A board to start from: STM32F405 or F407, two ADCs, one DAC, USART 2. Built by the tests, never
 * yet run on the real thing. */
#include "clocks.h"
#include "converters.h"
#include "cortex_m.h"
#include "device.h"
#include "seed.h"
#include "serve.h"
#include "usart.h"
#include "wire.h"

enum {
    RATE_HZ = 1000, /* until told another; divides the clock */
    BLOCKS = 32,
    SLOTS = 100,
    CHANNELS = 2,
    FORMAT = 2,
    TICKS_MIN = TIMER_HZ / 20000,
    MIDDLE = 2048,
    CODE_MAX = 4095
};

/* Codes are sent signed: 3.3 V / 4096 a count, 1.65 V at 0, as the supply is the reference. */
#define SCALE UINT64_C(0x3F4A666666666666)
#define OFFSET UINT64_C(0x3FFA666666666666)

static const struct pd_channel channels[CHANNELS] = {
    {"photodiode", "V", {SCALE, OFFSET, -MIDDLE, MIDDLE - 1}},
    {"drive", "V", {SCALE, OFFSET, -MIDDLE, MIDDLE - 1}}};

static bool set_rate(struct pd_rate *rate);

/* The drive rests at 0 V, so that it first needs an offset: a ramp to 1/2, then lines. */
static const struct pd_board board = {
    {"midfringe on STM32F405", "1.0", channels, CHANNELS, FORMAT, false, TIMER_HZ},
    {0, CODE_MAX, 0, CODE_MAX, 1000},
    SLOTS,
    set_rate};

static struct pd_device device;
static struct pd_frame blocks[BLOCKS];
static uint8_t payload[BLOCKS * SLOTS * CHANNELS * FORMAT];
static uint8_t out[1024];
static uint64_t clock;
static uint32_t taken; /* conversions */
static uint32_t ticks = TIMER_HZ / RATE_HZ;

static bool set_rate(struct pd_rate *rate)
{
    const uint64_t cycles = (uint64_t)TIMER_HZ * rate->denominator;
    const uint64_t wanted = (cycles + rate->numerator / 2u) / rate->numerator;

    if (wanted < TICKS_MIN || wanted > TIMER_HZ) {
        return false;
    }
    ticks = (uint32_t)wanted;
    converters_run(ticks);
    rate->numerator = TIMER_HZ;
    rate->denominator = ticks;
    return true;
}

static bool is_at_end(uint32_t code)
{
    return code == 0 || code == CODE_MAX;
}

/* Samples that were overwritten before we came count as missing. */
static void catch_up(void)
{
    const uint32_t begun = converters_count();

    while (begun - taken > 1u) {
        pd_device_miss(&device);
        clock += ticks;
        taken++;
    }
    taken = begun;
}

/* The converters are done: the drive for this sample goes out as the sample comes in. */
static void sample(void)
{
    const uint32_t both = converters_read();
    const uint32_t photodiode = both & 0xFFFFu;
    const uint32_t drive = both >> 16;
    const int32_t scan[CHANNELS] = {(int32_t)photodiode - MIDDLE, (int32_t)drive - MIDDLE};
    const uint16_t flags = is_at_end(photodiode) ? PD_OVER_RANGE : 0;

    catch_up();
    dac_write(pd_device_code(&device));
    pd_device_sample(&device, scan, clock, flags);
    clock += ticks;
}

bool board_read(uint8_t *byte)
{
    return usart_read(byte);
}

void board_write(const uint8_t *data, size_t count)
{
    usart_write(data, count);
}

void board_wait(void)
{
    wait_for_interrupt();
}

int main(void)
{
    const struct pd_rate rate = {RATE_HZ, 1};

    clocks_init();
    pd_ring_init(&device.ring, blocks, payload, BLOCKS, SLOTS, CHANNELS, FORMAT);
    pd_device_init(&device, &board, &rate, seed_new());
    usart_init();
    converters_init(board.drive.rest);
    converters_run(ticks);
    serve(&device, out, sizeof out);
    return 0;
}

extern uint32_t stack_top[];

enum {
    ADC_AT = 18,
    USART2_AT = 38
};

/* Stack, reset, 14 handlers of the core, then the interrupts by number. What is not enabled has no
 * handler; a fault stops the processor. */
__attribute__((section(".vectors"), used)) static const struct {
    uint32_t *stack;
    handler reset;
    handler core[14];
    handler interrupts[USART2_AT + 1];
} vectors = {stack_top, reset, {0}, {[ADC_AT] = sample, [USART2_AT] = usart_received}};
