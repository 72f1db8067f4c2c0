/* A trace that the emulator's loader puts into memory: the board then plays it, hears its commands
 * instead of the UART's, and ends. */
#ifndef TRACE_H
#define TRACE_H

#include <stdbool.h>
#include <stdint.h>

/* At 0x21000000, the 16 MB of PSRAM; all little-endian. Behind it `command_bytes` of commands, each
 * u32 tick, u32 length, bytes padded to a multiple of 4; then `count` samples of 16 bits. */
struct trace {
    uint32_t magic;
    uint32_t seed; /* of the stream id; used without a trace too */
    uint32_t ticks; /* of the sampling clock, until the end */
    uint32_t command_bytes;
    uint32_t count;
};

/* Whether there is a trace. */
bool trace_is_there(void);

uint32_t trace_seed(void);

/* Return the sample at an index, 0 behind the last one. */
int16_t trace_sample(uint64_t index);

/* Take the next byte of the commands that are due at this tick. */
bool trace_read(uint32_t tick, uint8_t *byte);

/* End the emulation if this tick is the last. */
void trace_end(uint32_t tick);

#endif
