"""Run by MicroPython with a terminal as its input and output: a board whose samples say their index."""

import select
import sys

from device import Device
from serve import serve

IDENTITY = {
    "board": "unix",
    "firmware": "1.0",
    "clock_hz": 1000000,
    "is_simulated": True,
    "channels": (("index", "1", 1.0, 0.0, -32768, 32767), ("drive", "1", 1.0, 0.0, -32768, 32767)),
}


class Terminal:
    period_us = 2000

    def __init__(self):
        self._poll = select.poll()
        self._poll.register(sys.stdin, select.POLLIN)

    def write(self, code):
        self._code = code

    def read(self):
        return (device.index % 30000, self._code - 2048), 0

    def heard(self):
        out = bytearray()
        while len(out) < 64 and self._poll.poll(0):
            byte = sys.stdin.buffer.read(1)
            if not byte:
                break
            out.extend(byte)
        return bytes(out)

    def say(self, data):
        if data:
            sys.stdout.buffer.write(data)


device = Device(IDENTITY, (2048, 2047, 48, 4048, 1200), 50, (500, 1), lambda rate: None, 40)
serve(device, Terminal(), 500 * 20)
