"""The life of a board: wait for the next sample's time, take it, hear the host, answer."""

import time

from wire import Parser

_LATE_MAX = 100000  # samples missed at most in one piece, after a sleep for instance


def serve(device: object, hardware: object, ticks: int | None = None) -> None:
    """Run a board for ever, or for so many samples.

    hardware: read() returns the samples of all channels and their flags, write(code) sets the
    drive, heard() returns what bytes have come, say(data) sends; period_us is the time between
    samples, in whole microseconds.
    """
    parser = Parser()
    clock = 0  # of the next sample [µs]
    due = time.ticks_us()
    while ticks is None or ticks > 0:
        late = time.ticks_diff(time.ticks_us(), due)
        if late < 0:
            continue
        # A sample taken a whole period late is no sample: it is counted as missing.
        for _ in range(min(late // hardware.period_us, _LATE_MAX)):
            hardware.say(device.missed())
            clock, due = clock + hardware.period_us, time.ticks_add(due, hardware.period_us)
        hardware.write(device.drive.code())
        values, flags = hardware.read()
        sent = device.sample(values, clock, flags)
        clock, due = clock + hardware.period_us, time.ticks_add(due, hardware.period_us)
        hardware.say(sent)
        for command in parser.feed(hardware.heard()):
            hardware.say(device.obey(command))
        if ticks is not None:
            ticks -= 1
