"""The lines of a board's drive, in volts: from what is wanted to the commands that set it.

Nothing here makes a set-up safe: a limit in software is no interlock.
"""

from collections.abc import Iterator
from dataclasses import dataclass
from math import isfinite

from firmware_bridge.announcement import Announcement
from firmware_bridge.arguments import (
    ALL_LINES,
    clear_arguments,
    line_arguments,
    phase_step,
    ramp_arguments,
)
from firmware_bridge.errors import BridgeError
from firmware_bridge.message import CommandCode

__all__ = [
    "DRIVE_CHANNEL",
    "DriveError",
    "DriveLine",
    "DriveLines",
    "Request",
    "full_scale_v",
    "rest_requests",
]

DRIVE_CHANNEL = "drive"
"""Name of the channel by which a board announces that it has drive lines, and their full scale."""

SLOTS_MAX = ALL_LINES
_FALL_S = 0.25  # from full amplitude to rest at the end of a recording
_FALL_STEPS = 10

Request = tuple[CommandCode, bytes]
"""A command's code and its arguments."""


class DriveError(BridgeError):
    """A line that the board or the limit does not allow."""


@dataclass(frozen=True, slots=True)
class DriveLine:
    """One line: amplitude · cos(2π · frequency · t + phase), t = 0 at the board's sample 0.

    Parameters
    ----------
    frequency_hz : float
        By the board's clock, above 0 and below half its rate.
    amplitude_v : float
        Zero to peak [V], ≥ 0.
    phase_rad : float
        Phase [rad].
    """

    frequency_hz: float
    amplitude_v: float
    phase_rad: float = 0.0


def full_scale_v(announcement: Announcement) -> float | None:
    """Return the full scale of a board's drive: what its drive channel shows at its highest code.

    Parameters
    ----------
    announcement : Announcement
        Of the board.

    Returns
    -------
    float or None
        [V] of that channel; None where no channel named "drive" is in volts.
    """
    for info in announcement.channels:
        if info.name.lower() == DRIVE_CHANNEL and info.unit == "V":
            high = announcement.code_limits[1] if info.high is None else info.high
            return abs(high * info.scale + info.offset) or None
    return None


class DriveLines:
    """The lines that are wanted, held within a limit.

    Parameters
    ----------
    limit_v : float or None
        Largest voltage that all lines together may reach [V]; without one no line is set.
    terminal_factor : float
        Volts that are meant per volt of the board's drive channel, such as a probe's divider: > 0.
    """

    def __init__(self, limit_v: float | None, terminal_factor: float = 1.0) -> None:
        self.limit_v = limit_v
        """As given."""
        self._factor = terminal_factor
        self.lines: dict[int, DriveLine] = {}
        """The lines that are set, by slot."""

    @property
    def peak_v(self) -> float:
        """What all lines together may reach [V]."""
        return sum(line.amplitude_v for line in self.lines.values())

    def set(self, slot: int, line: DriveLine) -> None:
        """Want a line, in place of the one in its slot.

        Parameters
        ----------
        slot : int
            From 0; how many there are, the board knows.
        line : DriveLine
            What it shall be.

        Raises
        ------
        DriveError
            If it is no line, or all lines together go beyond the limit.
        """
        if not 0 <= slot < SLOTS_MAX:
            raise DriveError(f"slot must be 0 to {SLOTS_MAX - 1}, got {slot}")
        if not (isfinite(line.amplitude_v) and line.amplitude_v >= 0):
            raise DriveError(f"amplitude_v must be finite and ≥ 0 V, got {line.amplitude_v!r}")
        if not isfinite(line.phase_rad):
            raise DriveError(f"phase_rad must be finite, got {line.phase_rad!r}")
        if not (isfinite(line.frequency_hz) and line.frequency_hz > 0):
            raise DriveError(f"frequency_hz must be finite and > 0 Hz, got {line.frequency_hz!r}")
        wanted = {**self.lines, slot: line}
        total_v = sum(each.amplitude_v for each in wanted.values())
        if self.limit_v is None:
            raise DriveError("no drive limit is known, so no line is set")
        if not total_v <= self.limit_v:
            raise DriveError(
                f"the lines together may reach {total_v:g} V, beyond the drive limit "
                f"of {self.limit_v:g} V"
            )
        self.lines = wanted

    def clear(self, slot: int) -> None:
        """Want no line in this slot.

        Parameters
        ----------
        slot : int
            From 0.
        """
        self.lines = {k: line for k, line in self.lines.items() if k != slot}

    def holding(self, lines: dict[int, DriveLine]) -> "DriveLines":
        """Return other lines under the same limit and factor.

        Parameters
        ----------
        lines : dict of int to DriveLine
            By slot.

        Returns
        -------
        DriveLines
            Not checked against the limit.
        """
        other = DriveLines(self.limit_v, self._factor)
        other.lines = dict(lines)
        return other

    def description(self) -> str:
        """Return the lines in words, for the header of a recording.

        Returns
        -------
        str
            Such as ``87.1 Hz 0.2 V 0 rad; 31.7 Hz 0.1 V 0 rad``, zero to peak.
        """
        return "; ".join(
            f"{line.frequency_hz:.15g} Hz {line.amplitude_v:.15g} V {line.phase_rad:.15g} rad"
            for line in self.lines.values()
        )

    def request(self, slot: int, announcement: Announcement, part: float = 1.0) -> Request:
        """Return the command that sets one of the lines on a board.

        Parameters
        ----------
        slot : int
            One that is set.
        announcement : Announcement
            Of the board.
        part : float
            Of the amplitude, 0 to 1.

        Returns
        -------
        Request
            Code and arguments.

        Raises
        ------
        DriveError
            If the board has no drive lines or its full scale is too small.
        MessageError
            If the frequency is not below half the rate.
        """
        line = self.lines[slot]
        full_v = full_scale_v(announcement)
        if not full_v:
            raise DriveError("the board announces no drive lines (no channel named 'drive' in V)")
        amplitude = line.amplitude_v / self._factor / full_v
        if amplitude > 1:
            raise DriveError(
                f"a line of {line.amplitude_v:g} V is beyond the board's full scale "
                f"of {full_v * self._factor:g} V"
            )
        step = phase_step(line.frequency_hz, announcement.rate_hz)
        return CommandCode.SET_LINE, line_arguments(slot, step, part * amplitude, line.phase_rad)

    def requests(self, announcement: Announcement, part: float = 1.0) -> list[Request]:
        """Return the commands that set all lines; parameters and errors as `request`."""
        return [self.request(slot, announcement, part) for slot in self.lines]

    def fall(self, announcement: Announcement) -> Iterator[tuple[float, list[Request]]]:
        """Yield how long to wait [s] and what to send then, until all lines are at rest.

        Parameters
        ----------
        announcement : Announcement
            Of the board.

        Yields
        ------
        tuple of float and list of Request
            The last one is `rest_requests`.
        """
        for step in range(1, _FALL_STEPS):
            yield _FALL_S / _FALL_STEPS, self.requests(announcement, 1.0 - step / _FALL_STEPS)
        yield _FALL_S / _FALL_STEPS, rest_requests(announcement.rate_hz)


def rest_requests(rate_hz: float) -> list[Request]:
    """Return the commands that bring a drive to rest.

    Parameters
    ----------
    rate_hz : float
        Samples per second of the board.

    Returns
    -------
    list of Request
        All lines cleared, the offset to zero within 50 ms.
    """
    samples = max(1, round(rate_hz / 20))
    return [
        (CommandCode.CLEAR_LINE, clear_arguments()),
        (CommandCode.RAMP, ramp_arguments(0.0, samples)),
    ]
