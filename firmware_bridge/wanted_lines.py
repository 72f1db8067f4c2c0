"""The drive lines that are wanted: which are still to be sent, waited for, or taken back."""

from firmware_bridge.announcement import Announcement
from firmware_bridge.arguments import clear_arguments
from firmware_bridge.board_lines import BoardLines, SentLine
from firmware_bridge.drive_answer import ANSWER_S
from firmware_bridge.drive_lines import DriveLine, DriveLines, Request
from firmware_bridge.errors import BridgeError
from firmware_bridge.message import CommandCode

__all__ = ["WantedLines"]

_ROUNDING = 1e-12  # sums of the same amplitudes in another order


class WantedLines:
    """Bring the board's lines to what is wanted, never beyond the limit on the way.

    Parameters
    ----------
    lines : DriveLines
        With the limit, and the lines wanted at first.
    board : BoardLines
        What the board may hold.
    is_patient : bool
        Wait for answers for ever; else a line without one is cleared after a while.
    """

    def __init__(self, lines: DriveLines, board: BoardLines, *, is_patient: bool) -> None:
        self._lines, self._board, self._is_patient = lines, board, is_patient
        self._due: list[int] = list(lines.lines)  # slots to be set or cleared
        self._asked_s: dict[int, float] = {}  # since when a slot's line has no answer
        self._refusals: list[str] = []

    @property
    def lines(self) -> dict[int, DriveLine]:
        """The lines wanted, by slot."""
        return dict(self._lines.lines)

    @property
    def are_any(self) -> bool:
        """Whether a line is wanted."""
        return bool(self._lines.lines)

    @property
    def are_due(self) -> bool:
        """Whether anything is still to be sent."""
        return bool(self._due)

    def set(self, slot: int, line: DriveLine) -> None:
        """Want a line; parameters and errors as `DriveLines.set`."""
        self._lines.set(slot, line)
        self._want(slot)

    def clear(self, slot: int) -> None:
        """Want no line in this slot."""
        self._lines.clear(slot)
        self._want(slot)

    def _want(self, slot: int) -> None:
        self._asked_s.pop(slot, None)
        self._due.append(slot)

    def drop(self) -> None:
        """Want none at all, without clearing each: the drive is brought to rest."""
        self._lines.lines = {}
        self._due.clear()
        self._asked_s.clear()

    def again(self) -> None:
        """Set all of them anew."""
        self._asked_s.clear()
        self._due = list(self._lines.lines)

    def falling(self) -> DriveLines:
        """Return the lines that the board certainly holds, under the same limit."""
        return self._lines.holding(self._board.sure)

    def take_refusals(self) -> list[str]:
        """Return why lines were not sent since the last time; see `DriveDesk.refusals`."""
        refusals, self._refusals = self._refusals, []
        return refusals

    def look(self, announcement: Announcement, now_s: float, repeat_s: float) -> None:
        """Find what is overdue, and take back what cannot be.

        Parameters
        ----------
        announcement : Announcement
            Of the board.
        now_s, repeat_s : float
            By the monotonic clock, and after how long a command is sent again [s].
        """
        overdue = self._board.overdue(now_s - repeat_s)
        self._due = list(dict.fromkeys([*self._due, *overdue]))
        self._give_up(now_s)
        self._refuse(announcement)

    def answered(self, sent: SentLine, status: int) -> None:
        """Take the board's answer to a line that was sent.

        Parameters
        ----------
        sent : SentLine
            With a slot.
        status : int
            Of the reply.
        """
        if sent.slot is None or self._lines.lines.get(sent.slot) != sent.line:
            return
        self._asked_s.pop(sent.slot, None)
        if status and sent.line is not None:  # nothing has changed
            self._restore(sent.slot)

    def _refuse(self, announcement: Announcement) -> None:
        """Take back what cannot be: each line by itself, and the youngest beyond the limit."""
        for slot in reversed(self._due.copy()):
            line = self._lines.lines.get(slot)
            if line is None:
                continue
            try:
                self._lines.request(slot, announcement)
                before = self._board.last(slot)
                if before is None or before.amplitude_v < line.amplitude_v:
                    self._lines.set(slot, line)  # others may have been restored since
            except BridgeError as error:
                self._refusals.append(str(error))
                self._due.remove(slot)
                self._restore(slot)

    def _restore(self, slot: int) -> None:
        """Want again what a slot holds as far as is known; where it is not, want none."""
        refused, before = self._lines.lines.get(slot), self._board.last(slot)
        kept = {k: line for k, line in self._lines.lines.items() if k != slot}
        if before is not None and before == refused:  # sent once without an answer
            self._due.append(slot)
        elif before is not None:
            kept[slot] = before
        self._lines.lines = kept
        self._asked_s.pop(slot, None)

    def requests(self, announcement: Announcement, now_s: float) -> list[Request]:
        """Return what is to be sent now; what has to wait for others stays due.

        Parameters
        ----------
        announcement : Announcement
            Of the board.
        now_s : float
            By the monotonic clock [s].

        Returns
        -------
        list of Request
            The board is taken to have been asked.
        """
        slots, self._due = self._due, []
        requests = []
        for slot in slots:
            line = self._lines.lines.get(slot)
            if line is None:
                code, arguments = CommandCode.CLEAR_LINE, clear_arguments(slot)
            elif self._fits(slot, line):
                code, arguments = self._lines.request(slot, announcement)
                self._asked_s.setdefault(slot, now_s)
            else:
                self._due.append(slot)  # until those it replaces are confirmed to be gone
                continue
            self._board.make(code, slot, line, now_s)
            requests.append((code, arguments))
        return requests

    def _fits(self, slot: int, line: DriveLine) -> bool:
        limit_v = self._lines.limit_v
        return limit_v is not None and (
            self._board.peak_v(slot, line) <= limit_v * (1.0 + _ROUNDING)
        )

    def _give_up(self, now_s: float) -> None:
        """Clear a line to which the board does not answer; a held one ends the recording."""
        for slot, since_s in list(self._asked_s.items()):
            if self._is_patient or now_s - since_s < ANSWER_S:
                continue
            del self._asked_s[slot]
            self._lines.clear(slot)
            self._due = list(dict.fromkeys([*self._due, slot]))
            self._refusals.append(
                f"the board does not answer to set line for {ANSWER_S:g} s; it is cleared"
            )
