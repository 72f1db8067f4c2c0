"""The lines of the drive as a live page shows them: those that the port's process says may be on."""

from dataclasses import dataclass
from typing import Any

from calibration.desk.watch.state import WatchState
from firmware_bridge.drive_lines import DriveError, DriveLine, DriveLines
from firmware_bridge.live_events import LiveLines

__all__ = ["SLOTS", "ShownDrive"]

SLOTS = 8
"""Lines that a page offers; how many there are, the board says."""

AWAY = ("gone", "silent", "failed", "closed")
"""States of a port behind which nobody can tell what is driven."""


@dataclass(frozen=True, slots=True)
class _Asked:
    """An order that the port's process has not taken account of yet; no slot: all of them."""

    order: int
    slot: int | None
    line: DriveLine | None


class ShownDrive:
    """The lines that may be on; a drive is shown at rest only where the board has confirmed it.

    Parameters
    ----------
    state : WatchState
        Its setup has the limit; told of every change, so that it follows the lines.
    is_replay : bool
        A recording replayed has no drive.
    is_text : bool
        A board that prints text drives nothing that it could be asked for.
    """

    def __init__(self, state: WatchState, *, is_replay: bool, is_text: bool = False) -> None:
        self._state, self._is_replay, self._is_text = state, is_replay, is_text
        self.limit_v = state.setup.drive_limit_v
        self._said: LiveLines | None = None
        self._asked: list[_Asked] = []
        self._stop: int | None = None  # the order, until it is confirmed
        self._driven: tuple[float, ...] = ()

    @property
    def wanted(self) -> dict[int, DriveLine]:
        """The lines that shall be set in the end, by slot."""
        wanted = {} if self._said is None else dict(self._said.wanted)
        for asked in self._asked:
            if asked.slot is None:
                wanted.clear()
            elif asked.line is None:
                wanted.pop(asked.slot, None)
            else:
                wanted[asked.slot] = asked.line
        return wanted

    @property
    def lines(self) -> dict[int, DriveLine]:
        """The largest line that each slot may hold now or soon, by slot."""
        found = {} if self._said is None else dict(self._said.lines)
        for slot, line in self.wanted.items():
            if slot not in found or found[slot].amplitude_v <= line.amplitude_v:
                found[slot] = line
        return dict(sorted(found.items()))

    @property
    def is_away(self) -> bool:
        """Whether the port or the board cannot be reached."""
        return not self._is_replay and self._state.port.state in AWAY

    @property
    def is_at_rest(self) -> bool:
        """Whether the board has confirmed that it is at rest, and can still be reached."""
        said = self._said
        is_confirmed = said is not None and said.is_at_rest and not self._asked
        return is_confirmed and not self.is_away

    def why_not(self) -> str | None:
        """Return why no line can be set, None where it can."""
        if self._is_replay:
            return "a recording is replayed: there is no drive"
        if self._is_text:
            return "a board that prints text takes no orders"
        if self.limit_v is None:
            return "the bench file states no [actuator] drive_limit: no line is set from here"
        if self.is_away:
            return f"the port is {self._state.port.state}: no line is set"
        stream = self._state.stream
        if stream is None:
            return "no board has announced itself"
        if stream.said.full_scale_v is None:
            return "the board has no drive lines"
        return None

    def slot(self, given: Any) -> int:  # noqa: ANN401  # from a page
        """Return the slot that is meant; without one the first that is free.

        Parameters
        ----------
        given : object
            From a page: a whole number, or nothing.

        Returns
        -------
        int
            From 0, below `SLOTS`.

        Raises
        ------
        DriveError
            If it is anything else, or none is free.
        """
        if given is None or given == "":
            free = [slot for slot in range(SLOTS) if slot not in self.wanted]
            if not free:
                raise DriveError(f"all {SLOTS} lines are set; clear one first")
            return free[0]
        if isinstance(given, bool) or not isinstance(given, int) or not 0 <= given < SLOTS:
            raise DriveError(f"slot must be a whole number, 0 to {SLOTS - 1}, got {given!r}")
        return given

    def check(self, slot: int, line: DriveLine) -> None:
        """Refuse what is no line or goes beyond the limit together with the others.

        Parameters
        ----------
        slot : int
            Where it would go, in place of what is there.
        line : DriveLine
            What it would be.

        Raises
        ------
        DriveError
            With the reason.
        """
        trial = DriveLines(self.limit_v)
        trial.lines = self.wanted
        trial.set(slot, line)

    def take(self, order: int, slot: int, line: DriveLine | None) -> None:
        """Take note of a line that was asked for, or of a slot to be cleared.

        Parameters
        ----------
        order : int
            Its number.
        slot : int
            Which.
        line : DriveLine or None
            What it shall hold.
        """
        self._asked.append(_Asked(order, slot, line))
        self._tell()

    def stop(self, order: int) -> None:
        """Take note that rest was asked for, under this number."""
        self._stop = order
        self._asked.append(_Asked(order, None, None))
        self._tell()

    def hear(self, said: LiveLines) -> bool:
        """Take note of what the port's process says of the lines.

        Parameters
        ----------
        said : LiveLines
            By the board's answers.

        Returns
        -------
        bool
            Whether this confirms a stop.
        """
        self._said = said
        self._asked = [asked for asked in self._asked if asked.order > said.orders]
        self._tell()
        is_stopped = self._stop is not None and said.orders >= self._stop and said.is_at_rest
        if is_stopped:
            self._stop = None
        return is_stopped

    def _tell(self) -> None:
        driven = tuple(line.frequency_hz for line in self.lines.values() if line.amplitude_v > 0)
        if driven != self._driven:
            self._driven = driven
            self._state.set_driven(driven)

    @property
    def condition(self) -> str:
        """What is known: "none", "unknown", "stopping", "on", "at rest"."""
        stream = self._state.stream
        has_drive = stream is not None and stream.said.full_scale_v is not None
        if self._is_replay or self._is_text or (not self.lines and not has_drive):
            return "none"
        if self.is_away:
            return "unknown"
        if self._stop is not None:
            return "stopping"
        if any(line.amplitude_v > 0 for line in self.lines.values()):
            return "on"
        return "at rest" if self.is_at_rest else "unknown"

    def document(self) -> dict[str, Any]:
        """Return what a page shows of the drive."""
        lines = [
            {
                "slot": slot,
                "frequency_hz": line.frequency_hz,
                "amplitude_v": line.amplitude_v,
                "phase_rad": line.phase_rad,
            }
            for slot, line in sorted(self.lines.items())
        ]
        return {
            "why_not": self.why_not(),
            "condition": self.condition,
            "limit_v": self.limit_v,
            "sum_v": sum(line.amplitude_v for line in self.lines.values()),
            "lines": lines,
        }
