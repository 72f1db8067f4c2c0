"""Between those who want drive lines and the port: what is due to be sent, what was answered."""

import threading
import time
from collections.abc import Iterator

from firmware_bridge.announcement import Announcement
from firmware_bridge.arguments import clear_arguments
from firmware_bridge.drive_lines import DriveError, DriveLine, DriveLines, Request, rest_requests
from firmware_bridge.errors import BridgeError
from firmware_bridge.message import CommandCode, Reply

__all__ = ["DriveDesk"]

_SETTLE_S = 0.3  # slew, and the filters behind the drive
_ANSWER_S = 5.0
_UNKNOWN = 1  # status of a reply
_NAMES = {
    CommandCode.SET_LINE: "set line",
    CommandCode.CLEAR_LINE: "clear line",
    CommandCode.RAMP: "ramp",
}


class DriveDesk:
    """Keep the wanted lines and what is still to be sent; every method may be called by any thread.

    Parameters
    ----------
    lines : DriveLines
        With the limit, and the lines wanted at first.
    is_held : bool
        Set the lines again whenever the board or the port has been away, and wait for its answers
        before the first sample is kept: for a recording with given lines. Otherwise the drive
        is brought to rest whenever the port has been opened and stays there until a line is set.
    """

    def __init__(self, lines: DriveLines, *, is_held: bool) -> None:
        self._lines, self._is_held = lines, is_held
        self._lock = threading.Lock()
        self._stream: int | None = None
        self._due: list[int] = []  # slots to be set or cleared
        self._rests = not is_held
        self._open: dict[int, CommandCode] = {}  # requests without an answer
        self._sent_s: float | None = None
        self._since_s = time.monotonic()
        self._was_settled = False
        self._notices: list[str] = []

    @property
    def are_any(self) -> bool:
        """Whether a line is wanted."""
        return bool(self._lines.lines)

    def set(self, slot: int, line: DriveLine) -> None:
        """Want a line; errors as `DriveLines.set`.

        Parameters
        ----------
        slot : int
            From 0.
        line : DriveLine
            What it shall be.
        """
        with self._lock:
            self._lines.set(slot, line)
            self._due.append(slot)

    def clear(self, slot: int) -> None:
        """Want no line in this slot.

        Parameters
        ----------
        slot : int
            From 0.
        """
        with self._lock:
            self._lines.clear(slot)
            self._due.append(slot)

    def rest(self) -> None:
        """Want the drive at rest, before anything else that waits."""
        with self._lock:
            self._lines.lines = {}
            self._due.clear()
            self._rests = True

    def away(self) -> None:
        """Take note that the port was away."""
        with self._lock:
            self._restart()

    def notices(self) -> list[str]:
        """Return what has happened to the lines since the last time.

        Returns
        -------
        list of str
            For people.
        """
        with self._lock:
            notices, self._notices = self._notices, []
            return notices

    def due(self, announcement: Announcement | None) -> list[Request]:
        """Return what is to be sent now.

        Parameters
        ----------
        announcement : Announcement or None
            The board's, None while it is not known.

        Returns
        -------
        list of Request
            Rest first.

        Raises
        ------
        BridgeError
            If the board cannot do what is wanted; that line is then no longer wanted.
        """
        with self._lock:
            if announcement is None:
                return []
            if announcement.stream != self._stream:
                if self._stream is not None or self._is_held:
                    self._restart()
                self._stream = announcement.stream
            requests = self._lines_of_rest(announcement)
            slots, self._due = self._due, []
            for slot in dict.fromkeys(slots):
                requests.append(self._request(slot, announcement))
            return requests

    def _restart(self) -> None:
        self._open.clear()
        if self._is_held:
            self._due = list(self._lines.lines)
            if self._was_settled:
                self._notices.append(
                    "the board or its port was away; its drive lines are set again"
                )
            return
        if self._lines.lines:
            self._notices.append("the board or its port was away; its drive is at rest")
        self._lines.lines, self._due, self._rests = {}, [], True

    def _lines_of_rest(self, announcement: Announcement) -> list[Request]:
        if not self._rests:
            return []
        self._rests = False
        return rest_requests(announcement.rate_hz)

    def _request(self, slot: int, announcement: Announcement) -> Request:
        if slot not in self._lines.lines:
            return CommandCode.CLEAR_LINE, clear_arguments(slot)
        try:
            return self._lines.request(slot, announcement)
        except BridgeError:
            self._lines.clear(slot)
            raise

    def sent(self, number: int, code: CommandCode) -> None:
        """Take note of what was sent.

        Parameters
        ----------
        number : int
            Of the request.
        code : CommandCode
            What it asks.
        """
        with self._lock:
            self._open[number % 65536] = code
            self._sent_s = time.monotonic()
            while len(self._open) > 256:  # of a board that never answers
                del self._open[next(iter(self._open))]

    def heard(self, reply: Reply) -> tuple[str, bool] | None:
        """Return what the board says to a command of this desk, and whether it refuses it.

        Parameters
        ----------
        reply : Reply
            Of the board.

        Returns
        -------
        tuple of str and bool, or None
            One line; None if the command was not ours.
        """
        with self._lock:
            code = self._open.pop(reply.request, None)
        if code is None or code != reply.code:
            return None
        if not reply.status:
            return f"{_NAMES[code]}: done", False
        if reply.status == _UNKNOWN:
            return "the board has no drive lines", True
        return f"the board refuses to {_NAMES[code]}: {reply.text or 'without a reason'}", True

    def is_settled(self) -> bool:
        """Return whether the first samples may be kept: all lines are set, and a moment has passed.

        Returns
        -------
        bool
            Once True, it stays so.

        Raises
        ------
        DriveError
            If the board does not answer.
        """
        if self._was_settled or not self._is_held or not self.are_any:
            return True
        now_s = time.monotonic()
        with self._lock:
            answered = self._sent_s is not None and not self._open and not self._due
            self._was_settled = answered and now_s - (self._sent_s or now_s) >= _SETTLE_S
            waits_s = now_s - (self._since_s if self._sent_s is None else self._sent_s)
        if not answered and self._sent_s is not None and waits_s > _ANSWER_S:
            raise DriveError(f"the board does not answer to set line for {_ANSWER_S:g} s")
        return self._was_settled

    def fall(self, announcement: Announcement | None) -> Iterator[tuple[float, list[Request]]]:
        """Yield how long to wait [s] and what to send then, until the drive is at rest.

        Parameters
        ----------
        announcement : Announcement or None
            The board's.

        Yields
        ------
        tuple of float and list of Request
            None where no line was ever set.
        """
        with self._lock:
            if announcement is None or self._sent_s is None:
                return
            try:
                steps = list(self._lines.fall(announcement))
            except BridgeError:  # a line this board cannot have was never set
                steps = [(0.0, rest_requests(announcement.rate_hz))]
        yield from steps
