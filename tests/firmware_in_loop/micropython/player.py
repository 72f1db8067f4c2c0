"""Run by MicroPython: play a script of commands on the board program, print every message in hex.

``micropython player.py AT TICKS FILE``: the file's commands are heard before sample AT.
"""

import sys
from binascii import hexlify

from device import Device
from wire import Parser

IDENTITY = {
    "board": "player",
    "firmware": "1.0",
    "clock_hz": 1000,
    "is_simulated": True,
    "channels": (("pd", "V", 0.5, 0.25, -2048, 2047), ("drive", "V", 1.0, 0.0, -32768, 32767)),
}


def set_rate(rate):
    return rate if rate[0] <= 10000 * rate[1] else None


def say(data):
    if data:
        print(hexlify(data).decode())


device = Device(IDENTITY, (2048, 2047, 48, 4048, 1200), 20, (1000, 1), set_rate, 6)
state = 2463534242
for tick in range(int(sys.argv[2])):
    if tick == int(sys.argv[1]):
        with open(sys.argv[3], "rb") as file:  # noqa: PTH123  # MicroPython has no pathlib
            for command in Parser().feed(file.read()):
                say(device.obey(command))
    state ^= state << 13 & 0xFFFFFFFF
    state ^= state >> 17
    state ^= state << 5 & 0xFFFFFFFF
    code = device.drive.code()
    say(device.sample(((state & 0xFFFF) - 0x8000, code - 2048), tick))
