#include "drive.h"

#include <stddef.h>

#include "drive_check.h"
#include "sine.h"
#include "wire.h"

#define FULL INT32_C(0x40000000)

enum {
    SILENCE_S = 2,
    FALLS_PER_S = 20 /* to rest within 50 ms */
};

static void clear_lines(struct pd_drive *drive, uint8_t line)
{
    for (uint32_t k = 0; k < PD_LINES; k++) {
        if (k == line || line == PD_ALL_LINES) {
            drive->lines[k].step = 0;
            drive->lines[k].turn = 0;
            drive->lines[k].amplitude = 0;
        }
    }
}

static void rest(struct pd_drive *drive)
{
    clear_lines(drive, PD_ALL_LINES);
    drive->offset = 0;
    drive->ramp.target = 0;
    drive->ramp.left = 0;
    drive->gain = PD_GAIN_ONE;
}

void pd_drive_init(struct pd_drive *drive, const struct pd_drive_limits *limits)
{
    drive->limits = limits;
    drive->code = limits->rest;
    drive->silent = 0;
    rest(drive);
}

void pd_drive_rate(struct pd_drive *drive, const struct pd_rate *rate)
{
    const uint32_t second = rate->numerator / rate->denominator;
    const uint32_t length = second / FALLS_PER_S;

    drive->silence = second > 0 ? second * SILENCE_S : 1;
    drive->fall = (uint16_t)(length > 0 ? (PD_GAIN_ONE + length - 1u) / length : PD_GAIN_ONE);
}

void pd_drive_restart(struct pd_drive *drive)
{
    for (uint32_t k = 0; k < PD_LINES; k++) {
        drive->lines[k].turn = 0;
    }
}

void pd_drive_heard(struct pd_drive *drive)
{
    drive->silent = 0;
}

/* Return a value in 2^-30 of full scale as a DAC code, rounded; biased, so that no negative number
 * is shifted. */
static int32_t code_of(const struct pd_drive *drive, int32_t value)
{
    const uint32_t biased = ((uint32_t)(value + FULL) + 0x4000u) >> 15;
    const uint32_t codes = (biased * drive->limits->span + 0x4000u) >> 15;

    return (int32_t)(drive->limits->rest + codes) - drive->limits->span;
}

static int32_t within(int32_t value, int32_t low, int32_t high)
{
    if (value < low) {
        return low;
    }
    return value > high ? high : value;
}

/* Within full scale: what would exceed it has been refused. */
static int32_t wanted_value(const struct pd_drive *drive)
{
    int32_t value = drive->offset;

    for (uint32_t k = 0; k < PD_LINES; k++) {
        const struct pd_line *line = &drive->lines[k];

        if (line->step != 0) {
            value += line->amplitude * pd_cos(line->turn + line->phase);
        }
    }
    if (drive->gain < PD_GAIN_ONE) {
        value = value / PD_GAIN_ONE * drive->gain;
    }
    return value;
}

uint16_t pd_drive_code(struct pd_drive *drive)
{
    const struct pd_drive_limits *limits = drive->limits;
    int32_t code = code_of(drive, wanted_value(drive));

    code = within(code, limits->low, limits->high);
    code = within(code, drive->code - limits->slew, drive->code + limits->slew);
    drive->code = (uint16_t)code;
    return drive->code;
}

static void advance_silence(struct pd_drive *drive)
{
    bool is_falling = drive->gain < PD_GAIN_ONE;

    if (drive->silent < drive->silence) {
        drive->silent++;
        is_falling = is_falling || drive->silent == drive->silence;
    }
    /* Once begun, the way to rest is gone to its end, even if the host is back. */
    if (!is_falling) {
        return;
    }
    if (drive->gain > drive->fall) {
        drive->gain = (uint16_t)(drive->gain - drive->fall);
    } else {
        rest(drive);
    }
}

void pd_drive_advance(struct pd_drive *drive)
{
    for (uint32_t k = 0; k < PD_LINES; k++) {
        drive->lines[k].turn += drive->lines[k].step;
    }
    drive->offset = pd_ramp_after(&drive->ramp, drive->offset);
    advance_silence(drive);
}

/* A change that the check refuses is taken back. Copied by hand: the core calls no memcpy. */
static void copy_line(struct pd_line *to, const struct pd_line *from)
{
    to->step = from->step;
    to->turn = from->turn;
    to->phase = from->phase;
    to->amplitude = from->amplitude;
}

const char *pd_drive_set_line(struct pd_drive *drive, uint8_t line, const struct pd_line *wanted)
{
    struct pd_line before;
    const char *refusal;

    if (line >= PD_LINES || wanted->step == 0 || wanted->step > 0x7FFFFFFFu) {
        return "no such line";
    }
    copy_line(&before, &drive->lines[line]);
    copy_line(&drive->lines[line], wanted);
    refusal = pd_drive_check(drive);
    if (refusal != NULL) {
        copy_line(&drive->lines[line], &before);
    }
    return refusal;
}

const char *pd_drive_clear_line(struct pd_drive *drive, uint8_t line)
{
    if (line >= PD_LINES && line != PD_ALL_LINES) {
        return "no such line";
    }
    clear_lines(drive, line);
    return NULL;
}

const char *pd_drive_ramp(struct pd_drive *drive, int16_t target, uint32_t samples)
{
    const char *refusal;

    if (samples == 0 || target == INT16_MIN) {
        return "no such ramp";
    }
    pd_ramp_aim(&drive->ramp, drive->offset, target * PD_GAIN_ONE, samples);
    refusal = pd_drive_check(drive);
    if (refusal != NULL) {
        pd_ramp_aim(&drive->ramp, drive->offset, drive->offset, 1); /* it stays where it is */
    }
    return refusal;
}
