"""Between those who want drive lines and the port: what is due to be sent, what was answered."""

import contextlib
import threading
import time
from collections.abc import Callable, Iterator

from firmware_bridge.announcement import Announcement
from firmware_bridge.board_lines import BoardLines, SentLine
from firmware_bridge.drive_answer import answer_text, drive_command
from firmware_bridge.drive_lines import DriveError, DriveLine, DriveLines, Request, rest_requests
from firmware_bridge.drive_rest import DriveRest
from firmware_bridge.drive_settling import DriveSettling
from firmware_bridge.errors import BridgeError
from firmware_bridge.live_events import LiveLines
from firmware_bridge.message import CommandCode, Reply
from firmware_bridge.wanted_lines import WantedLines

__all__ = ["DriveDesk"]

_REPEAT_S = 0.5  # a command without an answer is sent again


class DriveDesk:
    """Keep the wanted lines and what is still to be sent; every method may be called by any thread.

    Whatever is asked in whatever order, and whichever commands or answers are lost: what the board
    may drive stays within the limit. A line waits until those it replaces are confirmed to be
    gone. Rest is sent before everything, again and again until the board has confirmed it, and no
    line before that.

    Parameters
    ----------
    lines : DriveLines
        With the limit, and the lines wanted at first.
    is_held : bool
        Set the lines again whenever the board or the port has been away, and wait for its answers
        before the first sample is kept: for a recording with given lines. Otherwise the drive
        is brought to rest whenever the port has been opened and stays there until a line is set.
    tell : callable, optional
        Takes `LiveLines` at every change.
    """

    def __init__(
        self,
        lines: DriveLines,
        *,
        is_held: bool,
        tell: Callable[[LiveLines], None] | None = None,
    ) -> None:
        self._is_held, self._tell = is_held, tell
        self._lock = threading.RLock()
        self._board = BoardLines()
        self._wanted = WantedLines(lines, self._board, is_patient=is_held)
        self._stream: int | None = None
        self._rest = DriveRest()
        self._settling = DriveSettling()
        self._rate_hz: float | None = None
        self._is_away = False
        self._orders = 0
        self._told: LiveLines | None = None
        self._notices: list[str] = []

    @property
    def are_any(self) -> bool:
        """Whether a line is wanted."""
        return self._wanted.are_any

    def set(self, slot: int, line: DriveLine) -> None:
        """Want a line; errors as `DriveLines.set`.

        Parameters
        ----------
        slot : int
            From 0.
        line : DriveLine
            What it shall be.

        Raises
        ------
        DriveError
            Also while the port is away: nobody could tell when it would be set.
        """
        with self._lock:
            if self._is_away:
                raise DriveError("the port is gone, so no line is set")
            self._wanted.set(slot, line)
            self._show()

    def clear(self, slot: int) -> None:
        """Want no line in this slot.

        Parameters
        ----------
        slot : int
            From 0.
        """
        with self._lock:
            self._wanted.clear(slot)
            self._show()

    def rest(self) -> None:
        """Want the drive at rest, before anything else that waits."""
        with self._lock:
            self._wanted.drop()
            self._rest.want(self._board.serial)
            self._show()

    def took(self, order: int) -> None:
        """Take note that an order has been obeyed or refused, and tell.

        Parameters
        ----------
        order : int
            Its number.
        """
        with self._lock:
            self._orders = order
            self._show()

    def _show(self) -> None:
        if self._tell is None:
            return
        is_at_rest = not self._rest.is_open and not self._board.largest
        seen = LiveLines(self._board.largest, self._wanted.lines, is_at_rest, self._orders)
        if seen != self._told:
            self._told = seen
            self._tell(seen)  # under the lock: so they come in order

    def away(self) -> None:
        """Take note that the port was away."""
        with self._lock:
            self._is_away = True
            self._settling.away()
            self._restart()
            self._rest.want(self._board.serial)
            self._show()

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

    def refusals(self) -> list[str]:
        """Return why lines were not sent since the last time.

        Returns
        -------
        list of str
            For people; such a line is no longer wanted, and what its slot held before still is.
        """
        with self._lock:
            return self._wanted.take_refusals()

    def due(self, announcement: Announcement | None) -> list[Request]:
        """Return what is to be sent now.

        Parameters
        ----------
        announcement : Announcement or None
            The board's, None while it is not known.

        Returns
        -------
        list of Request
            Rest first. What cannot be sent is told by `refusals`.
        """
        with self._lock:
            if announcement is None:
                return []
            self._is_away = False
            if announcement.stream != self._stream:
                if self._stream is not None:
                    self._restart()
                self._stream = announcement.stream
            self._rate_hz = announcement.rate_hz
            now_s = time.monotonic()
            requests = self._requests_of_rest(announcement, now_s)
            self._wanted.look(announcement, now_s, _REPEAT_S)
            if not self._rest.is_open:
                requests += self._wanted.requests(announcement, now_s)
            self._show()
            return requests

    def _restart(self) -> None:
        """Set held lines again, as the board counts anew; forget others."""
        if self._is_held:
            self._wanted.again()
            if self._settling.is_over:
                self._notices.append(
                    "the board or its port was away; its drive lines are set again"
                )
            return
        if self._wanted.are_any:
            self._notices.append("the board or its port was away; its drive is brought to rest")
        self._wanted.drop()
        self._rest.want(self._board.serial)

    def _requests_of_rest(self, announcement: Announcement, now_s: float) -> list[Request]:
        requests = self._rest.due(announcement.rate_hz, now_s, _REPEAT_S)
        for code, _ in requests:
            self._board.make(code, None, None, now_s)
        return requests

    def sent(self, number: int, code: CommandCode) -> None:
        """Take note of what was sent, in the order of `due`.

        Parameters
        ----------
        number : int
            Of the request.
        code : CommandCode
            What it asks.
        """
        with self._lock:
            self._board.number(number, code)
            self._settling.sent()

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
            code = drive_command(reply)
            if code is None:
                return None
            sent = self._board.answered(reply.request, code, is_done=not reply.status)
            if sent is None:
                return None
            self._follow(sent, reply.status)
            self._show()
        return answer_text(code, reply.status, reply.text)

    def _follow(self, sent: SentLine, status: int) -> None:
        """Draw the conclusions from an answer."""
        if sent.slot is None:
            self._rest.heard(sent.code, sent.serial, status)
            if not self._rest.is_open:
                self._board.rested()
            return
        self._wanted.answered(sent, status)

    def is_settled(self, at: tuple[int, int] | None = None) -> bool:
        """Return whether the first samples may be kept: all lines are set, and a moment has passed.

        Parameters
        ----------
        at : tuple of int and int, optional
            Stream id and first sample of what has arrived; by default none come.

        Returns
        -------
        bool
            Once True, it stays so.

        Raises
        ------
        DriveError
            If the board does not answer.
        """
        if self._settling.is_over or not self._is_held or not self.are_any:
            return True
        with self._lock:
            is_done = (
                self._board.is_answered and not self._wanted.are_due and not self._rest.is_open
            )
            return self._settling.wait(is_done=is_done, at=at, rate_hz=self._rate_hz)

    def fall(self, announcement: Announcement | None) -> Iterator[tuple[float, list[Request]]]:
        """Yield how long to wait [s] and what to send then, the rest last.

        Parameters
        ----------
        announcement : Announcement or None
            The board's.

        Yields
        ------
        tuple of float and list of Request
            None where nothing was ever sent.
        """
        with self._lock:
            if announcement is None or not self._settling.has_sent:
                return
            steps = [(0.0, rest_requests(announcement.rate_hz))]
            falling = self._wanted.falling()
            if falling.lines:
                with contextlib.suppress(BridgeError):  # of a board that is another one by now
                    steps = list(falling.fall(announcement))
        yield from steps
