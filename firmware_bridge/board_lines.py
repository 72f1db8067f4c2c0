"""What the slots of a board's drive may hold: what it has confirmed, and what it has not answered yet."""

from dataclasses import dataclass

from firmware_bridge.drive_lines import DriveLine
from firmware_bridge.message import CommandCode

__all__ = ["BoardLines", "SentLine"]

_OPEN = 256  # commands without an answer, of a board that never answers


@dataclass(slots=True)
class SentLine:
    """A command that has no answer yet.

    Parameters
    ----------
    serial : int
        Counts up: later commands have higher ones.
    code : CommandCode
        What it asks.
    slot : int or None
        Which line; None for all and for the offset.
    line : DriveLine or None
        What the slot shall hold.
    at_s : float
        When it was made, by the monotonic clock [s].
    number : int or None
        Of the request; None until it is sent.
    """

    serial: int
    code: CommandCode
    slot: int | None
    line: DriveLine | None
    at_s: float
    number: int | None = None


class BoardLines:
    """Follow commands and answers; until a command is answered, it may have been obeyed or not."""

    def __init__(self) -> None:
        self._held: dict[int, DriveLine] = {}
        self._open: list[SentLine] = []
        self.serial = 0
        """Of the next command."""

    @property
    def is_answered(self) -> bool:
        """Whether nothing waits for an answer."""
        return not self._open

    @property
    def largest(self) -> dict[int, DriveLine]:
        """The largest line that each slot may hold, by slot."""
        found = dict(self._held)
        for sent in self._open:
            if sent.slot is not None and sent.line is not None:
                before = found.get(sent.slot)
                if before is None or before.amplitude_v <= sent.line.amplitude_v:
                    found[sent.slot] = sent.line
        return dict(sorted(found.items()))

    @property
    def sure(self) -> dict[int, DriveLine]:
        """The lines that are certainly set as they stand here, by slot."""
        if any(sent.code == CommandCode.CLEAR_LINE and sent.slot is None for sent in self._open):
            return {}
        doubtful = {sent.slot for sent in self._open}
        return {slot: line for slot, line in self._held.items() if slot not in doubtful}

    def peak_v(self, slot: int, line: DriveLine) -> float:
        """Return what all lines may reach while a command to set one of them is on its way.

        Parameters
        ----------
        slot : int
            Which one.
        line : DriveLine
            What it shall be.

        Returns
        -------
        float
            [V].
        """
        volts = {k: each.amplitude_v for k, each in self.largest.items()}
        volts[slot] = max(volts.get(slot, 0.0), line.amplitude_v)
        return sum(volts.values())

    def last(self, slot: int) -> DriveLine | None:
        """Return what a slot was told last, or else what it holds."""
        for sent in reversed(self._open):
            if sent.slot == slot or (sent.slot is None and sent.code == CommandCode.CLEAR_LINE):
                return sent.line
        return self._held.get(slot)

    def overdue(self, before_s: float) -> list[int]:
        """Return the slots whose last command was made before a moment and has no answer."""
        at_s = {sent.slot: sent.at_s for sent in self._open if sent.slot is not None}
        return [slot for slot, sent_s in at_s.items() if sent_s <= before_s]

    def make(
        self, code: CommandCode, slot: int | None, line: DriveLine | None, at_s: float
    ) -> None:
        """Take note of a command that is going to be sent; parameters as `SentLine`."""
        self._open.append(SentLine(self.serial, code, slot, line, at_s))
        self.serial += 1
        while len(self._open) > _OPEN:
            self._forget(self._open.pop(0))

    def number(self, number: int, code: CommandCode) -> None:
        """Take note of the number under which the next command made is sent."""
        for sent in self._open:
            if sent.number is None and sent.code == code:
                sent.number = number % 65536
                return

    def answered(self, number: int, code: CommandCode, *, is_done: bool) -> SentLine | None:
        """Take note of an answer.

        Parameters
        ----------
        number : int
            Of the request.
        code : CommandCode
            What it asked.
        is_done : bool
            Whether the board obeyed; if not, nothing has changed.

        Returns
        -------
        SentLine or None
            The command; None if there is none without an answer.
        """
        found = [sent for sent in self._open if (sent.number, sent.code) == (number, code)]
        if not found:
            return None
        self._open.remove(found[-1])
        if is_done:
            self._obeyed(found[-1])
        return found[-1]

    def rested(self) -> None:
        """Wait no longer for answers to repetitions of a rest: no line was sent in between."""
        self._open = [sent for sent in self._open if sent.slot is not None]

    def _obeyed(self, done: SentLine) -> None:
        """Drop what was sent before: a board obeys in the order of sending."""
        is_all = done.code == CommandCode.CLEAR_LINE and done.slot is None
        if is_all:
            self._held.clear()
        elif done.slot is not None:
            self._held.pop(done.slot, None)
            if done.line is not None:
                self._held[done.slot] = done.line

        def is_over(sent: SentLine) -> bool:
            is_same = sent.slot == done.slot and (done.slot is not None or sent.code == done.code)
            return sent.serial < done.serial and (is_same or (is_all and sent.slot is not None))

        self._open = [sent for sent in self._open if not is_over(sent)]

    def _forget(self, sent: SentLine) -> None:
        """Keep of a command that was never answered what may still be driven."""
        if sent.slot is None or sent.line is None:
            return
        held = self._held.get(sent.slot)
        if held is None or held.amplitude_v < sent.line.amplitude_v:
            self._held[sent.slot] = sent.line
