"""The simulated board's side of its drive: commands to lines, rest on silence, and its pace."""

import struct
import time
from math import pi

from firmware_bridge.arguments import ALL_LINES, step_frequency_hz
from firmware_bridge.decoder import Command
from firmware_bridge.frame import CommandCode
from firmware_bridge.simulated.bench import SimulatedBench
from firmware_bridge.simulated.live_drive import LiveDrive
from firmware_bridge.simulated.setup import Tone

__all__ = ["Pace", "WiredDrive"]

LINES = 6
_SILENCE_S = 2.0
_FORMS = {
    CommandCode.SET_LINE: struct.Struct("<BBHII"),
    CommandCode.CLEAR_LINE: struct.Struct("<BBH"),
    CommandCode.RAMP: struct.Struct("<hHI"),
}


class Pace:
    """Let a board send in real time: when the next frame is due.

    Parameters
    ----------
    frame_s : float
        From one frame to the next [s].
    """

    def __init__(self, frame_s: float) -> None:
        self._frame_s, self._next_s = frame_s, 0.0

    def begin(self) -> None:
        """Begin now."""
        self._next_s = time.monotonic()

    def count(self) -> None:
        """Take note of one frame sent; one that is late does not hurry the others."""
        self._next_s = max(self._next_s + self._frame_s, time.monotonic() - 1.0)

    def wait_s(self, longest_s: float) -> float:
        """Return how long to wait for the next frame, at most ``longest_s``; ≤ 0 if it is due."""
        return min(longest_s, self._next_s - time.monotonic())


class WiredDrive:
    """The drive of a simulated board, moved by commands.

    Parameters
    ----------
    bench : SimulatedBench
        Its converter's full scale is the drive's, seen through the nominal divider.
    """

    CODES = tuple(_FORMS)

    def __init__(self, bench: SimulatedBench) -> None:
        self.drive = LiveDrive()
        self._rate_hz = bench.rate_hz
        self._true_rate_hz = bench.rate_hz * (1.0 + bench.truth.clock)
        high = 2 ** (bench.converter.bits - 1) - 1
        self._full_v = high * bench.converter.step_v * bench.terminal_factor
        self._heard_s = time.monotonic()

    def hear(self) -> None:
        """Take note that the host is there."""
        self._heard_s = time.monotonic()

    def check_silence(self) -> None:
        """Go to rest if the host has been silent for 2 s."""
        if time.monotonic() - self._heard_s > _SILENCE_S:
            self._heard_s = time.monotonic()
            self.drive.rest()

    def maybe_refusal(self, command: Command) -> str:
        """Do what a command asks; return why not, or nothing.

        Parameters
        ----------
        command : Command
            Of one of `CODES`.

        Returns
        -------
        str
            Empty where it is done.
        """
        code = CommandCode(command.code)
        if len(command.arguments) != _FORMS[code].size:
            return "wrong length"
        values = _FORMS[code].unpack(command.arguments)
        if code == CommandCode.SET_LINE:
            return self._set(*values)
        if code == CommandCode.CLEAR_LINE:
            return self._clear(values[0])
        return self._ramp(values[0], values[2])

    def _set(self, line: int, _: int, amplitude: int, step: int, phase: int) -> str:
        if line >= LINES or not 1 <= step < 1 << 31:
            return "no such line"
        volts = amplitude / 65536 * self._full_v
        if self.drive.peak_v(line, volts) > self._full_v:
            return "beyond the range"
        frequency_hz = step_frequency_hz(step, self._true_rate_hz)
        self.drive.set(line, Tone(frequency_hz, volts, 2 * pi * phase / 2**32))
        return ""

    def _clear(self, line: int) -> str:
        if line >= LINES and line != ALL_LINES:
            return "no such line"
        if line == ALL_LINES:
            self.drive.clear_lines()
        else:
            self.drive.clear(line)
        return ""

    def _ramp(self, target: int, samples: int) -> str:
        volts = target / 32768 * self._full_v
        if not samples:
            return "no such ramp"
        if self.drive.peak_v(None, volts) > self._full_v:
            return "beyond the range"
        self.drive.ramp(volts, samples / self._true_rate_hz)
        return ""
