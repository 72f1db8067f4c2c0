"""Board program for a Raspberry Pi Pico: two ADC inputs, a PWM output as drive, USB serial.

Copy all files of this folder to the board. GP26: photodiode; GP27: drive, read back; GP15: drive,
to be smoothed by a low-pass filter. Python takes its time: 500 samples a second by default; what
it misses is counted in the frames, never hidden. Written for, and not yet tried on, the real board.
"""

import os
import select
import sys

import micropython
from device import Device
from machine import ADC, PWM, Pin
from serve import serve

RATE_MAX = 1000
PWM_HZ = 60000
IDENTITY = {
    "board": "midfringe on MicroPython",
    "firmware": "1.0",
    "clock_hz": 1000000,
    "is_simulated": False,
    # 16 bits on the scale of 3.3 V, of which the converter has 12; sent as signed
    "channels": (
        ("photodiode", "V", 3.3 / 65536, 1.65, -32768, 32767),
        ("drive", "V", 3.3 / 65536, 1.65, -32768, 32767),
    ),
}
LIMITS = (0, 32767, 0, 32767, 8000)  # at rest the output is at 0 V


class Pico:
    """The pins."""

    period_us = 2000

    def __init__(self) -> None:
        self._inputs = ADC(26), ADC(27)
        self._output = PWM(Pin(15), freq=PWM_HZ, duty_u16=0)
        self._poll = select.poll()
        self._poll.register(sys.stdin, select.POLLIN)
        micropython.kbd_intr(-1)  # a byte 3 is data here, not Ctrl-C

    def set_rate(self, wanted: tuple) -> tuple | None:
        """Take the rate with the nearest period in whole microseconds."""
        period_us = (1000000 * wanted[1] + wanted[0] // 2) // wanted[0]
        if not 1000000 // RATE_MAX <= period_us <= 1000000:
            return None
        self.period_us = period_us
        return 1000000, period_us

    def read(self) -> tuple:
        """Return both channels and the flags."""
        codes = [channel.read_u16() for channel in self._inputs]
        is_at_end = codes[0] in (0, 65535)
        return [code - 32768 for code in codes], int(is_at_end)

    def write(self, code: int) -> None:
        """Set the drive."""
        self._output.duty_u16(2 * code)

    def heard(self) -> bytes:
        """Return what has come from the host."""
        out = bytearray()
        while len(out) < 64 and self._poll.poll(0):
            byte = sys.stdin.buffer.read(1)
            if not byte:
                break
            out.extend(byte)
        return bytes(out)

    def say(self, data: bytes) -> None:
        """Send to the host."""
        if data:
            sys.stdout.buffer.write(data)


pins = Pico()
seed = int.from_bytes(os.urandom(4), "little")
serve(Device(IDENTITY, LIMITS, 50, (500, 1), pins.set_rate, seed), pins)
