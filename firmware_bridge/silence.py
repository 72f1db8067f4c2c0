"""A board that says nothing, or nothing that can be understood: when to give up, and why."""

import logging
import time

__all__ = ["Silence"]

_LOG = logging.getLogger("firmware_bridge.port_watch")  # steps aside for the line of progress

_SILENCE_S = 5.0  # without one valid message, or line of numbers among bytes, at the start
_IDLE_S = 30.0  # with nothing but announcements, answers and notes at the start
_STALL_S = 10.0  # without a frame midway
_TEXT_SILENCE_S = 30.0  # without a line of numbers
_PRINTABLE = bytes(range(32, 127)) + b"\t\r\n"


class Silence:
    """Watch what comes, and say what is wrong if nothing valid does.

    Parameters
    ----------
    name : str
        The port.
    baud : int
        Symbols per second.
    is_text : bool
        Whether lines of numbers are expected, not frames.
    """

    def __init__(self, name: str, baud: int, is_text: bool) -> None:
        self._name, self._baud, self._is_text = name, baud, is_text
        self._heard_s = self._sampled_s = time.monotonic()
        self._is_heard = False  # ever
        self._is_echo = self._is_told = False
        self._bytes = self._printable = self._zeros = 0  # since the last time something valid came

    @property
    def idle_s(self) -> float:
        """How long nothing has come of what is recorded [s]."""
        return time.monotonic() - self._sampled_s

    def note(self, data: bytes, is_valid: bool, is_sampled: bool, is_echo: bool = False) -> None:
        """Take note of bytes.

        Parameters
        ----------
        data : bytes
            What came.
        is_valid : bool
            Whether a valid message or line ended in it.
        is_sampled : bool
            Whether one of them was what is recorded, not only an answer.
        is_echo : bool
            Whether our own commands came back in it.
        """
        self._is_echo = self._is_echo or is_echo
        if is_sampled:
            self._sampled_s = time.monotonic()
        if is_valid:
            self._heard_s = time.monotonic()
            self._is_heard = True
            self._bytes = self._printable = self._zeros = 0
            return
        self._bytes += len(data)
        self._printable += len(data) - len(data.translate(None, _PRINTABLE))
        self._zeros += data.count(0)

    def reset(self) -> None:
        """Begin to wait anew: the port was away."""
        self._heard_s = self._sampled_s = time.monotonic()

    def maybe_complaint(
        self, is_announced: bool, is_recording: bool, is_patient: bool, every_s: float = 0.0
    ) -> str:
        """Return what is wrong, empty while it is not yet time to say so.

        Parameters
        ----------
        is_announced : bool
            Whether the board's announcement is known.
        is_recording : bool
            Whether samples have been kept.
        is_patient : bool
            Whether to wait for a board that has fallen silent midway.
        every_s : float
            From one result to the next of a board that sends those of its lock-in only [s].

        Returns
        -------
        str
            Without what was kept.
        """
        silent_s = time.monotonic() - self._heard_s
        if self._is_text:
            return self._maybe_no_lines(silent_s)
        idle_s = time.monotonic() - self._sampled_s
        if not is_recording and silent_s > _SILENCE_S + every_s:
            return f"{self._name}: {self._why_nothing(is_announced)}"
        if not is_recording and idle_s > _IDLE_S + every_s:
            return f"{self._name}: the board answers and sent no samples for {_IDLE_S:g} s"
        stall_s = _STALL_S + 2 * every_s
        if is_recording and idle_s > stall_s and not is_patient:
            came = f", {self._bytes} other bytes" if self._bytes else ", nor anything else"
            came = ", though it answers" if idle_s - silent_s > 1.0 else came
            return f"{self._name} sent no valid frame for {stall_s:g} s{came}"
        return ""

    def waits_for_a_first_line(self) -> bool:
        """Tell, once in the log, that nothing has come of a board that prints lines.

        Returns
        -------
        bool
            False where something has come: what is wrong then does not pass by waiting.
        """
        if not self._is_text or self._is_heard or self._bytes:
            return False
        if not self._is_told:
            self._is_told = True
            _LOG.warning("%s sent nothing for %g s; waiting for a line", self._name, _SILENCE_S)
        return True

    def _maybe_no_lines(self, silent_s: float) -> str:
        if not self._is_heard and not self._bytes and silent_s > _SILENCE_S:
            return (
                f"{self._name} sent nothing for {_SILENCE_S:g} s (is it the right port? --reconnect "
                "waits for a first line)"
            )
        if self._bytes and silent_s > _SILENCE_S and not self._is_heard:
            frames = ", or does it send frames, without --text" if self._zeros else ""
            return (
                f"{self._name}: {self._bytes} bytes came in {_SILENCE_S:g} s and no line of numbers "
                f"is in them (is {self._baud} baud right{frames}?)"
            )
        if silent_s > _TEXT_SILENCE_S:
            came = f", {self._bytes} other bytes" if self._bytes else ", nor anything else"
            return f"{self._name} sent no line of numbers for {_TEXT_SILENCE_S:g} s{came}"
        return ""

    def _why_nothing(self, is_announced: bool) -> str:
        if is_announced:
            return f"the board announced itself and sent no samples for {_SILENCE_S:g} s"
        if not self._bytes:
            return f"the board is silent for {_SILENCE_S:g} s"
        if self._is_echo:
            return (
                f"only our own commands came back for {_SILENCE_S:g} s: the port loops or echoes, and "
                "no board speaks"
            )
        came = f"{self._bytes} bytes came in {_SILENCE_S:g} s"
        if self._printable > 0.9 * self._bytes:
            return f"{came}, text and no frames (--text records lines of numbers)"
        return f"{came} and no valid frame is in them (is {self._baud} baud right?)"
