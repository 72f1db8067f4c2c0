/* What each command does to a device: pd_device_obey() and pd_device_answer() of device.h. */
#ifndef PD_COMMANDS_H
#define PD_COMMANDS_H

#include "device.h"

/* Everything that follows from a rate: frames and the drive's 2 s. */
void pd_device_take_rate(struct pd_device *device, const struct pd_rate *rate);

#endif
