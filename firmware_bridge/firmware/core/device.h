/* A board as the host sees it: commands in, messages out, one call a sample between them.
 *
 * In the sampling interrupt: pd_device_code() for the DAC, then pd_device_sample(); or
 * pd_device_miss(). Elsewhere, with that interrupt held off: pd_device_obey(), which is quick.
 * Elsewhere, without: pd_device_answer() and pd_device_next(), which are not. */
#ifndef PD_DEVICE_H
#define PD_DEVICE_H

#include <stdbool.h>
#include <stddef.h>
#include <stdint.h>

#include "announcement.h"
#include "drive.h"
#include "lock_in.h"
#include "parser.h"
#include "ring.h"

/* What a board is; it stays in read-only memory. */
struct pd_board {
    struct pd_identity identity;
    struct pd_drive_limits drive;
    uint16_t slots_max;
    /* Sample at the rate nearest to *rate and put there what it truly is; or return false. */
    bool (*set_rate)(struct pd_rate *rate);
};

struct pd_device {
    uint8_t sends; /* PD_SEND_..., 0 while stopped */
    uint16_t slots;
    uint32_t stream;
    uint64_t index; /* of the present sample, counted from the last start */
    const struct pd_board *board;
    struct pd_rate rate;
    struct pd_ring ring;
    struct pd_drive drive;
    struct pd_lock_in lock_in;
};

/* The ring must be ready. seed: different at every start of the board; rate: the one it samples at
 * until it is told another. */
void pd_device_init(struct pd_device *device, const struct pd_board *board,
                    const struct pd_rate *rate, uint32_t seed);

/* Do what a command asks; return NULL, or why not. */
const char *pd_device_obey(struct pd_device *device, const struct pd_command *command);

/* Write the answer to a command that was obeyed or refused; return its length, 0 if there is none. */
size_t pd_device_answer(const struct pd_device *device, const struct pd_command *command,
                        const char *refusal, uint8_t *out, size_t size);

/* Return the DAC code for the present sample. */
uint16_t pd_device_code(struct pd_device *device);

/* Take the present sample of every channel and go on to the next. */
void pd_device_sample(struct pd_device *device, const int32_t *scan, uint64_t clock,
                      uint16_t flags);

/* The present sample was not taken in time: count it as missing and go on to the next. */
void pd_device_miss(struct pd_device *device);

/* Write the next message that is due; return its length, 0 if there is none. */
size_t pd_device_next(struct pd_device *device, uint8_t *out, size_t size);

#endif
