"""What a page may ask for: recordings in the session's folder, drive lines within the limit, stop.

Everything is checked here, whatever the page has checked, and again by the process that holds the port.
"""

from dataclasses import dataclass
from typing import Any

from calibration.desk.watch.order_values import number, phase
from calibration.desk.watch.source import Source
from calibration.desk.watch.state import WatchState
from calibration.desk.watch.stream import WINDOWS_S
from firmware_bridge.drive_lines import DriveError, DriveLine, DriveLines
from firmware_bridge.errors import BridgeError
from metro.errors import MetroError

__all__ = ["SLOTS", "Answer", "Orders"]

SLOTS = 8  # lines that a page offers; how many there are, the board says


@dataclass(frozen=True, slots=True)
class Answer:
    """What became of an order; ``refused`` where nothing was done."""

    text: str
    refused: bool = False


class Orders:
    """Obey what pages ask for, or say why not.

    Parameters
    ----------
    source : Source
        Checks everything once more.
    state : WatchState
        Told of the lines that are set.
    is_replay : bool
        A recording replayed: it has neither drive nor recording.
    """

    def __init__(self, source: Source, state: WatchState, *, is_replay: bool = False) -> None:
        self._source, self._state, self._is_replay = source, state, is_replay
        self.limit_v = state.setup.drive_limit_v
        self._lines = DriveLines(self.limit_v)
        self._stream: int | None = None
        self._doers = {
            "stop": self._stop,
            "record": self._record,
            "end recording": self._end_recording,
            "set line": self._set_line,
            "clear line": self._clear_line,
            "new average": self._new_average,
        }

    @property
    def lines(self) -> dict[int, DriveLine]:
        """The lines that are set, by slot."""
        return self._lines.lines

    def why_no_drive(self) -> str | None:
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

    def obey(self, order: Any) -> Answer | None:  # noqa: ANN401  # whatever JSON a page sends
        """Do what an order says.

        Parameters
        ----------
        order : object
            A dict with ``do`` and what that needs; anything else is refused.

        Returns
        -------
        Answer or None
            For people; None where there is nothing to say.
        """
        doer = self._doers.get(str(order.get("do"))) if isinstance(order, dict) else None
        if doer is None:
            return Answer("no such order", refused=True)
        try:
            return doer(order)
        except (MetroError, BridgeError, KeyError, TypeError, ValueError, OSError) as error:
            return Answer(_one_line(error), refused=True)

    def follow_port(self) -> None:
        """Take note of a port or board that was away: its drive is at rest and stays there."""
        stream = None if self._state.stream is None else self._state.stream.said.stream
        was_away = self._state.port.state in ("gone", "failed", "closed")
        if was_away or (self._stream is not None and stream != self._stream):
            self.forget_lines()
        self._stream = stream

    def forget_lines(self) -> None:
        """Take note that no line is set any more."""
        if self._lines.lines:
            self._lines.lines = {}
            self._tell()

    def _stop(self, _order: dict[str, Any]) -> Answer:
        if self._is_replay:
            return Answer("a recording is replayed: there is no drive")
        self._source.rest()
        self.forget_lines()
        return Answer("drive stopped")

    def _record(self, order: dict[str, Any]) -> Answer:
        if self._is_replay:
            return Answer("a recording is replayed: there is nothing to record", refused=True)
        name = str(order["name"]).strip()
        name = name if name.lower().endswith(".mfr") else f"{name}.mfr"
        return Answer(f"recording to {self._source.start_recording(name).name}")

    def _end_recording(self, _order: dict[str, Any]) -> Answer:
        self._source.stop_recording()
        return Answer("recording ended")

    def _set_line(self, order: dict[str, Any]) -> Answer:
        reason = self.why_no_drive()
        if reason is not None:
            return Answer(reason, refused=True)
        slot = self._slot(order.get("slot"))
        line = DriveLine(
            number(order["frequency"], "frequency", "Hz"),
            number(order["amplitude"], "amplitude", "V"),
            phase(order.get("phase", 0.0)),
        )
        before = dict(self._lines.lines)
        self._lines.set(slot, line)
        try:
            self._source.set_line(slot, line.frequency_hz, line.amplitude_v, line.phase_rad)
        except (BridgeError, OSError):
            self._lines.lines = before
            raise
        self._tell()
        return Answer(f"line {slot + 1} set: {line.frequency_hz:g} Hz, {line.amplitude_v:g} V")

    def _clear_line(self, order: dict[str, Any]) -> Answer:
        slot = self._slot(order["slot"])
        self._source.clear_line(slot)
        self._lines.clear(slot)
        self._tell()
        return Answer(f"line {slot + 1} cleared")

    def _new_average(self, _order: dict[str, Any]) -> None:
        if self._state.stream is not None:
            self._state.stream.spectrum.clear()

    def _slot(self, given: Any) -> int:  # noqa: ANN401  # from a page
        """Return the slot that is meant; without one the first that is free."""
        if given is None or given == "":
            free = [slot for slot in range(SLOTS) if slot not in self._lines.lines]
            if not free:
                raise DriveError(f"all {SLOTS} lines are set; clear one first")
            return free[0]
        if isinstance(given, bool) or not isinstance(given, int) or not 0 <= given < SLOTS:
            raise DriveError(f"slot must be a whole number, 0 to {SLOTS - 1}, got {given!r}")
        return given

    def _tell(self) -> None:
        driven = [line.frequency_hz for line in self._lines.lines.values() if line.amplitude_v > 0]
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
            for slot, line in sorted(self._lines.lines.items())
        ]
        total_v = sum(line.amplitude_v for line in self._lines.lines.values())
        return {
            "why_not": self.why_no_drive(),
            "limit_v": self.limit_v,
            "sum_v": total_v,
            "lines": lines,
            "can_record": not self._is_replay,
            "windows_s": list(WINDOWS_S),
        }


def _one_line(error: Exception) -> str:
    if isinstance(error, KeyError):
        return f"the order lacks {error.args[0]!r}"
    return " ".join(str(error).split()) or type(error).__name__
