/* Whether a drive keeps to its limits for as long as it lasts. */
#ifndef PD_DRIVE_CHECK_H
#define PD_DRIVE_CHECK_H

#include "drive.h"

/* Return NULL, or what the drive would exceed. */
const char *pd_drive_check(const struct pd_drive *drive);

#endif
