"""What is said to a board that sends frames: who are you, drive so, start, go on, stop."""

import time

from firmware_bridge.drive_desk import DriveDesk
from firmware_bridge.farewell import Farewell
from firmware_bridge.lock_in_start import LockInStart, result_every_s
from firmware_bridge.message import CommandCode, encode_command
from firmware_bridge.port import ByteSource
from firmware_bridge.port_watch import PortWatch
from firmware_bridge.silence import Silence
from firmware_bridge.sink import Sink

__all__ = ["BoardTalk"]

_ASK_S = 0.5  # how often an unannounced board is asked again, and others that the host is there
_IDLE_S = 1.5  # a board that samples sends a frame every 0.5 s at least


class BoardTalk:
    """Say what is due; called by the thread that reads the port.

    Parameters
    ----------
    port : ByteSource
        Where the board listens.
    intake : Sink
        Knows what the board has said about itself.
    silence : Silence
        Knows how long it has sent nothing.
    watch : PortWatch
        Who is told of drive lines that cannot be.
    desk : DriveDesk, optional
        Who wants drive lines of the board.
    lock_in : LockInStart, optional
        What the board is asked for instead of samples.
    """

    def __init__(
        self,
        port: ByteSource,
        intake: Sink,
        silence: Silence,
        watch: PortWatch,
        desk: DriveDesk | None,
        lock_in: LockInStart | None,
    ) -> None:
        self._port, self._intake, self._silence, self._watch = port, intake, silence, watch
        self._desk, self._lock_in = desk, lock_in
        self._asked_s: float | None = None  # None: the port has just been opened
        self._is_started = False
        self._request = 0

    def opened(self) -> None:
        """Take note that the port was opened again: the board is asked anew."""
        self._asked_s = None

    def speak(self) -> None:
        """Say what is due."""
        now_s = time.monotonic()
        if self._asked_s is None or now_s - self._asked_s >= _ASK_S:
            self._ask(is_first=self._asked_s is None)
            self._asked_s = now_s
        self._drive()
        self._begin()

    def leave(self) -> None:
        """Bring the drive to rest and the board to a stop; say where the rest is not confirmed."""
        if self._desk is not None:
            complaint = Farewell(self._port, self._say).rest(self._desk, self._intake)
            if complaint:
                self._watch.alarm(f"{self._watch.name}: {complaint}")
        self._say(CommandCode.STOP)

    def _ask(self, *, is_first: bool) -> None:
        if is_first or not self._intake.is_announced:
            self._say(CommandCode.IDENTIFY)
        else:
            self._say(CommandCode.KEEP_ALIVE)  # else a board's drive goes to rest after 2 s
        # A board that was reset waits to be started; one that sends goes on as it is.
        every_s = result_every_s(self._lock_in, self._intake.every_s)
        if is_first or self._silence.idle_s > _IDLE_S + every_s:
            self._is_started = False
        self._begin()

    def _drive(self) -> None:
        """Send what is due for the drive."""
        if self._desk is None:
            return
        for code, arguments in self._desk.due(self._intake.announcement):
            self._desk.sent(self._request + 1, code)
            self._say(code, arguments)  # whatever becomes of it: without an answer it is repeated
        for reason in self._desk.refusals():
            self._watch.refused(reason)
        for notice in self._desk.notices():
            self._watch.notice(notice)

    def _begin(self) -> None:
        """Have the board send, once what is asked for can be said."""
        if self._is_started:
            return
        arguments = b""
        if self._lock_in is not None:
            announced = self._intake.announcement
            # Its sums begin with the start: the lines must be there before.
            if announced is None or (self._desk is not None and not self._desk.is_settled()):
                return
            arguments = self._lock_in.arguments(announced)
            self._say(CommandCode.STOP)
        self._is_started = True
        self._say(CommandCode.START, arguments)

    def _say(self, code: CommandCode, arguments: bytes = b"") -> int:
        """Send a command; return the number of the request, 0 where the port does not take it."""
        self._request += 1
        is_sent = self._port.write(encode_command(code, self._request % 65536, arguments))
        return self._request if is_sent else 0
