"""The lines of the drive as a live page shows them: asked for, taken back where refused, forgotten."""

from typing import Any

from calibration.desk.watch.state import WatchState
from firmware_bridge.drive_lines import DriveError, DriveLine, DriveLines
from firmware_bridge.live_events import LiveReply

__all__ = ["SLOTS", "ShownDrive"]

SLOTS = 8
"""Lines that a page offers; how many there are, the board says."""

_ABOUT_SETTING = ("set line", "a line of", "drive lines", "half the")


class ShownDrive:
    """The lines that are set as far as is known; a drive that may be on is never shown at rest.

    Parameters
    ----------
    state : WatchState
        Its setup has the limit; told of every change, so that it follows the lines.
    is_replay : bool
        A recording replayed has no drive.
    """

    def __init__(self, state: WatchState, *, is_replay: bool) -> None:
        self._state, self._is_replay = state, is_replay
        self.limit_v = state.setup.drive_limit_v
        self._lines = DriveLines(self.limit_v)
        self._stream: int | None = None
        self._unanswered: list[tuple[int, DriveLine | None]] = []  # slot, and what it held before

    @property
    def lines(self) -> dict[int, DriveLine]:
        """The lines that are set, by slot."""
        return self._lines.lines

    def why_not(self) -> str | None:
        """Return why no line can be set, None where it can."""
        if self._is_replay:
            return "a recording is replayed: there is no drive"
        if self.limit_v is None:
            return "the bench file states no [actuator] drive_limit: no line is set from here"
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
            free = [slot for slot in range(SLOTS) if slot not in self.lines]
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
        trial.lines = dict(self.lines)
        trial.set(slot, line)

    def take(self, slot: int, line: DriveLine) -> None:
        """Take note of a line that was asked for; errors as `check`."""
        before = self.lines.get(slot)
        self._lines.set(slot, line)
        self._unanswered = [*self._unanswered[-SLOTS:], (slot, before)]
        self._tell()

    def clear(self, slot: int) -> None:
        """Take note of a slot that was cleared."""
        self._lines.clear(slot)
        self._tell()

    def forget(self) -> None:
        """Take note that no line is set any more."""
        self._unanswered.clear()
        if self.lines:
            self._lines.lines = {}
            self._tell()

    def follow_port(self) -> None:
        """Take note of a port or board that was away: its drive comes to rest and stays there."""
        stream = None if self._state.stream is None else self._state.stream.said.stream
        was_away = self._state.port.state in ("gone", "failed", "closed")
        if was_away or (self._stream is not None and stream != self._stream):
            self.forget()
        self._stream = stream

    def hear(self, reply: LiveReply) -> None:
        """Take note of what the port answers: a line that was refused is not set.

        Parameters
        ----------
        reply : LiveReply
            Where it is not plainly about a line, the lines stay as they are.
        """
        is_about = any(word in reply.text for word in _ABOUT_SETTING)
        if not self._unanswered or not is_about:
            return
        slot, before = self._unanswered.pop(0)
        if reply.refused:
            kept = {k: line for k, line in self.lines.items() if k != slot}
            self._lines.lines = kept if before is None else {**kept, slot: before}
            self._tell()

    def _tell(self) -> None:
        driven = [line.frequency_hz for line in self.lines.values() if line.amplitude_v > 0]
        self._state.set_driven(tuple(driven))

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
            "limit_v": self.limit_v,
            "sum_v": sum(line.amplitude_v for line in self.lines.values()),
            "lines": lines,
        }
