"""What a page may ask for: recordings in the session's folder, drive lines within the limit, stop.

Everything is checked here, whatever the page has checked, and again by the process that holds the port.
"""

from dataclasses import dataclass
from typing import Any

from calibration.desk.watch.drive import AWAY, ShownDrive
from calibration.desk.watch.order_values import number, phase
from calibration.desk.watch.source import Source
from calibration.desk.watch.state import WatchState
from calibration.desk.watch.stream import WINDOWS_S
from firmware_bridge.drive_lines import DriveLine
from firmware_bridge.errors import BridgeError
from metro.errors import MetroError

__all__ = ["NOT_KNOWN", "OF_DRIVE", "Answer", "Orders"]

OF_DRIVE = frozenset(("stop", "set line", "clear line"))
"""Orders whose answers belong beside the drive's controls."""

NOT_KNOWN = "whether the drive is at rest is not known"
"""Where nobody has confirmed it."""


@dataclass(frozen=True, slots=True)
class Answer:
    """What became of an order.

    Parameters
    ----------
    text : str
        For people.
    refused : bool
        Whether nothing was done.
    is_stop_over : bool
        Whether nothing more will be heard of a stop: it is confirmed, or cannot be.
    """

    text: str
    refused: bool = False
    is_stop_over: bool = False


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
    is_text : bool
        A board that prints text: nothing can be told to it.
    """

    def __init__(
        self,
        source: Source,
        state: WatchState,
        *,
        is_replay: bool = False,
        is_text: bool = False,
    ) -> None:
        self._source, self._state, self._is_replay = source, state, is_replay
        self._is_text = is_text
        self.drive = ShownDrive(state, is_replay=is_replay, is_text=is_text)
        self._doers = {
            "stop": self._stop,
            "record": self._record,
            "end recording": self._end_recording,
            "set line": self._set_line,
            "clear line": self._clear_line,
            "new average": self._new_average,
        }

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
        except (
            MetroError,
            BridgeError,
            KeyError,
            TypeError,
            ValueError,
            OverflowError,
            OSError,
        ) as error:
            return Answer(_one_line(error), refused=True)

    def _stop(self, _order: dict[str, Any]) -> Answer:
        if self._is_replay:
            return Answer("a recording is replayed: there is no drive", is_stop_over=True)
        if self._is_text:
            return Answer(
                "a board that prints text cannot be told to stop: switch the driver off",
                refused=True,
                is_stop_over=True,
            )
        try:
            self.drive.stop(self._source.rest())
        except BridgeError as error:
            return Answer(f"{_one_line(error)}; {NOT_KNOWN}", refused=True)
        if self.drive.is_away:
            state = self._state.port.state
            return Answer(f"stop sent, but the port is {state}; {NOT_KNOWN}", refused=True)
        return Answer("stop sent")  # the board's answers confirm it

    def _record(self, order: dict[str, Any]) -> Answer:
        if self._is_replay:
            return Answer("a recording is replayed: there is nothing to record", refused=True)
        port = self._state.port
        if port.state in AWAY:
            return Answer(f"the port is {port.state}: no recording can begin", refused=True)
        name = str(order["name"]).strip()
        name = name if name.lower().endswith(".mfr") else f"{name}.mfr"
        return Answer(f"recording to {self._source.start_recording(name).name}")

    def _end_recording(self, _order: dict[str, Any]) -> Answer:
        self._source.stop_recording()
        return Answer("recording ended")

    def _set_line(self, order: dict[str, Any]) -> Answer:
        reason = self.drive.why_not()
        if reason is not None:
            return Answer(reason, refused=True)
        slot = self.drive.slot(order.get("slot"))
        line = DriveLine(
            number(order["frequency"], "frequency", "Hz"),
            number(order["amplitude"], "amplitude", "V"),
            phase(order.get("phase", 0.0)),
        )
        self.drive.check(slot, line)
        number_of_order = self._source.set_line(
            slot, line.frequency_hz, line.amplitude_v, line.phase_rad
        )
        self.drive.take(number_of_order, slot, line)
        return Answer(f"line {slot + 1} sent: {line.frequency_hz:g} Hz, {line.amplitude_v:g} V")

    def _clear_line(self, order: dict[str, Any]) -> Answer:
        slot = self.drive.slot(order["slot"])
        self.drive.take(self._source.clear_line(slot), slot, None)
        return Answer(f"clear line {slot + 1} sent")

    def _new_average(self, _order: dict[str, Any]) -> None:
        if self._state.stream is not None:
            self._state.stream.spectrum.clear()

    def document(self) -> dict[str, Any]:
        """Return what a page shows of the drive, and what it can ask for."""
        return self.drive.document() | {
            "can_record": not self._is_replay,
            "windows_s": list(WINDOWS_S),
        }


def _one_line(error: Exception) -> str:
    if isinstance(error, KeyError):
        return f"the order lacks {error.args[0]!r}"
    return " ".join(str(error).split()) or type(error).__name__
