/* A board inside the emulator: MPS2 with a Cortex-M3 (QEMU's mps2-an385), one tick a sample. */
#include "cortex_m.h"
#include "device.h"
#include "serve.h"
#include "synthetic.h"
#include "trace.h"
#include "uart.h"
#include "wire.h"

enum {
    CLOCK_HZ = 25000000,
    RATE_HZ = 1000, /* until told another; divides the clock */
    BLOCKS = 32,
    SLOTS = 50,
    CHANNELS = 2,
    FORMAT = 2,
    RELOAD_MIN = CLOCK_HZ / 10000,
    RELOAD_MAX = 1 << 24, /* 24 bits: 1.5 Hz */
    REST = 2048,
    CODE_MAX = 2047 /* both converters have 12 bits */
};

static const struct pd_channel channels[CHANNELS] = {
    /* 2^-11 V and 2^-10 V a count: +-1 V at the photodiode, +-2 V at the drive */
    {"photodiode", "V", {UINT64_C(0x3F40000000000000), PD_F64_ZERO, -CODE_MAX - 1, CODE_MAX}},
    {"drive", "V", {UINT64_C(0x3F50000000000000), PD_F64_ZERO, -REST, CODE_MAX}}};

static bool set_rate(struct pd_rate *rate);

static const struct pd_board board = {
    {"midfringe on emulated MPS2", "1.0", channels, CHANNELS, FORMAT, true, CLOCK_HZ},
    {REST, CODE_MAX, 48, 4048, 1500},
    SLOTS,
    set_rate};

static struct pd_device device;
static struct pd_frame blocks[BLOCKS];
static uint8_t payload[BLOCKS * SLOTS * CHANNELS * FORMAT];
static uint8_t out[1024];
static volatile uint32_t ticks;
static uint64_t clock;
static uint32_t reload = CLOCK_HZ / RATE_HZ;

static bool set_rate(struct pd_rate *rate)
{
    const uint64_t cycles = (uint64_t)CLOCK_HZ * rate->denominator;
    const uint64_t wanted = (cycles + rate->numerator / 2u) / rate->numerator;

    if (wanted < RELOAD_MIN || wanted > RELOAD_MAX) {
        return false;
    }
    reload = (uint32_t)wanted;
    SYSTICK_RELOAD = reload - 1u;
    SYSTICK_VALUE = 0;
    rate->numerator = CLOCK_HZ;
    rate->denominator = reload;
    return true;
}

static void sample(void)
{
    const int32_t drive = (int32_t)pd_device_code(&device) - REST;
    int32_t scan[CHANNELS];
    uint16_t flags = 0;

    scan[0] = trace_is_there() ? trace_sample(device.index) : synthetic_sample(drive);
    scan[1] = drive;
    if (scan[0] >= CODE_MAX || scan[0] < -CODE_MAX) {
        scan[0] = scan[0] > 0 ? CODE_MAX : -CODE_MAX - 1;
        flags = PD_OVER_RANGE;
    }
    pd_device_sample(&device, scan, clock, flags);
    clock += reload;
    ticks++;
}

bool board_read(uint8_t *byte)
{
    return trace_is_there() ? trace_read(ticks, byte) : uart_read(byte);
}

void board_write(const uint8_t *data, size_t count)
{
    uart_write(data, count);
}

void board_wait(void)
{
    if (trace_is_there()) {
        trace_end(ticks);
    }
    wait_for_interrupt();
}

int main(void)
{
    const struct pd_rate rate = {RATE_HZ, 1};

    pd_ring_init(&device.ring, blocks, payload, BLOCKS, SLOTS, CHANNELS, FORMAT);
    pd_device_init(&device, &board, &rate, trace_seed());
    uart_init();
    SYSTICK_RELOAD = reload - 1u;
    SYSTICK_VALUE = 0;
    SYSTICK_CONTROL = SYSTICK_RUN;
    serve(&device, out, sizeof out);
    return 0;
}

extern uint32_t stack_top[];

/* Stack, reset, 13 handlers of the core, SysTick, then the UART's receiver as interrupt 0. What
 * is not used is not enabled; a fault stops at address 0, and the emulator says so. */
__attribute__((section(".vectors"), used)) static const struct {
    uint32_t *stack;
    handler reset;
    handler core[13];
    handler systick;
    handler received;
} vectors = {stack_top, reset, {0}, sample, uart_received};
