#include "ramp.h"

void pd_ramp_aim(struct pd_ramp *ramp, int32_t from, int32_t target, uint32_t samples)
{
    const uint32_t distance =
        target > from ? (uint32_t)(target - from) : (uint32_t)(from - target);

    ramp->target = target;
    ramp->length = samples;
    ramp->left = samples;
    ramp->step = distance / samples;
    ramp->rest = distance % samples;
    ramp->carry = 0;
}

int32_t pd_ramp_after(struct pd_ramp *ramp, int32_t value)
{
    uint32_t step = ramp->step;

    if (ramp->left == 0) {
        return value;
    }
    ramp->left--;
    /* carry + rest reaches length; written so that it cannot overflow. */
    if (ramp->carry >= ramp->length - ramp->rest) {
        ramp->carry -= ramp->length - ramp->rest;
        step++;
    } else {
        ramp->carry += ramp->rest;
    }
    return ramp->target > value ? value + (int32_t)step : value - (int32_t)step;
}
