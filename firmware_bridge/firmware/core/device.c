#include "device.h"

#include "commands.h"
#include "wire.h"

void pd_device_init(struct pd_device *device, const struct pd_board *board,
                    const struct pd_rate *rate, uint32_t seed)
{
    device->board = board;
    device->index = 0;
    device->stream = seed;
    device->sends = 0;
    pd_drive_init(&device->drive, &board->drive);
    pd_device_take_rate(device, rate);
    pd_lock_in_begin(&device->lock_in, 0, 0);
}

uint16_t pd_device_code(struct pd_device *device)
{
    return pd_drive_code(&device->drive);
}

static void go_on(struct pd_device *device)
{
    pd_drive_advance(&device->drive);
    device->index++;
}

void pd_device_sample(struct pd_device *device, const int32_t *scan, uint64_t clock,
                      uint16_t flags)
{
    if ((device->sends & PD_SEND_SAMPLES) != 0) {
        pd_ring_push(&device->ring, scan, device->index, clock, flags);
    }
    pd_lock_in_push(&device->lock_in, device->drive.lines, scan[device->lock_in.channel]);
    go_on(device);
}

void pd_device_miss(struct pd_device *device)
{
    if ((device->sends & PD_SEND_SAMPLES) != 0) {
        pd_ring_miss(&device->ring);
    }
    go_on(device);
    pd_lock_in_restart(&device->lock_in, device->index);
}

size_t pd_device_next(struct pd_device *device, uint8_t *out, size_t size)
{
    const size_t length =
        pd_lock_in_encode(&device->lock_in, device->drive.lines, device->stream, out, size);

    return length > 0 ? length : pd_ring_encode(&device->ring, out, size);
}
