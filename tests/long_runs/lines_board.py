"""A board that sends four lines in noise, photodiode and drive, at a steady pace; started as a process."""

import json
import sys
import time

import numpy as np
from long_runs.faulty_board import PtyPort

from firmware_bridge.announcement import Announcement, ChannelInfo, encode_announcement
from firmware_bridge.frame import encode_stream

__all__ = ["LINES_HZ", "counts", "main"]

LINES_HZ = (31.0, 87.0, 141.0, 233.0)  # whole, so that one second says everything
_SLOTS = 500
_FRAMES = 4  # a batch: 40 ms at 50 kS/s


def counts(rate_hz):
    """Return the counts of every second, shape (rate, 2)."""
    time_s = np.arange(round(rate_hz)) / rate_hz
    tones = sum(np.cos(2 * np.pi * f * time_s) for f in LINES_HZ)
    noise = np.random.default_rng(1).normal(0.0, 12.0, (time_s.size, 2))
    return np.rint(np.stack([6000.0 + 800.0 * tones, 300.0 * tones], axis=1) + noise).astype(
        np.int16
    )


def main():
    """Send ``seconds`` of samples at ``rate_hz``, ``speed`` times as fast; tell how many."""
    order = json.loads(sys.argv[1])
    rate_hz, speed = order["rate_hz"], order["speed"]
    port = PtyPort(order["folder"])
    print(port.name, flush=True)
    second = counts(rate_hz)
    channels = [ChannelInfo(name, "V", 3e-4) for name in ("photodiode", "drive")]
    announcement = Announcement(
        1, rate_hz, "int16", _SLOTS, channels, board="lines", simulated=True
    )
    port.wait_for_commands()
    port.send(encode_announcement(announcement))
    sent, begun_s, late_s = 0, time.monotonic(), 0.0
    while sent < order["seconds"] * rate_hz:
        rows = (sent + np.arange(_SLOTS * _FRAMES)) % len(second)
        wire = encode_stream(
            second[rows],
            slots=_SLOTS,
            first_index=sent,
            first_sequence=sent // _SLOTS % 2**32,
            stream=1,
        )
        port.send(wire)
        port.commands()
        sent += rows.size
        wait_s = begun_s + sent / rate_hz / speed - time.monotonic()
        late_s = max(late_s, -wait_s)
        time.sleep(max(0.0, wait_s))
    port.drain()
    print(json.dumps({"samples": sent, "late_s": late_s}), flush=True)
    sys.stdin.readline()  # until all is read


if __name__ == "__main__":
    main()
