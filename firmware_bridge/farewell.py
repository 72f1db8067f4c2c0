"""How a board is left: its drive falls to rest, and it is heard whether the board has confirmed that."""

import time
from collections.abc import Callable

from firmware_bridge.drive_desk import DriveDesk
from firmware_bridge.drive_lines import Request, rest_requests
from firmware_bridge.drive_rest import REST, is_confirmed
from firmware_bridge.envelope import Unwrapper
from firmware_bridge.message import CommandCode, Reply, parse_message
from firmware_bridge.message_head import MessageError, MessageType
from firmware_bridge.port import ByteSource, PortLostError
from firmware_bridge.sink import Sink

__all__ = ["Farewell"]

_WAIT_S = 1.0
_REPEAT_S = 0.2  # a command without an answer, or an answer, may be damaged on its way
_SILENCE_S = 2  # SPEC.md: after which a board brings its drive to rest by itself


class Farewell:
    """Bring a drive to rest once nobody reads the port any more but this.

    Parameters
    ----------
    port : ByteSource
        Where the board is heard; what it measures meanwhile is not kept.
    say : callable
        Sends a command with its arguments; returns the number of the request, 0 where it cannot.
    """

    def __init__(self, port: ByteSource, say: Callable[[CommandCode, bytes], int]) -> None:
        self._port, self._say = port, say
        self._unwrapper = Unwrapper()
        self._asked: dict[int, CommandCode] = {}  # what the rest is, by the number of the request
        self._open = set(REST)  # what of it is not confirmed

    def rest(self, desk: DriveDesk, intake: Sink) -> str:
        """Bring the drive to rest and wait for the board's answers, a second at most.

        Parameters
        ----------
        desk : DriveDesk
            Knows what is driven.
        intake : Sink
            Knows the board.

        Returns
        -------
        str
            What is to be told where the rest is not confirmed; empty where it is, or where nothing was
            ever driven.
        """
        announcement = intake.announcement
        for wait_s, requests in desk.fall(announcement):
            if not (self._listen(wait_s) and self._send(requests)):
                return _untold()
        if announcement is None or not self._asked:
            return ""
        end_s = time.monotonic() + _WAIT_S
        while True:
            if not self._listen(_REPEAT_S):
                return _untold()
            if not self._open:
                return ""
            if time.monotonic() >= end_s:
                return _unconfirmed()
            if not self._send(rest_requests(announcement.rate_hz)):
                return _untold()

    def _send(self, requests: list[Request]) -> bool:
        """Send; return whether the port takes it."""
        for code, arguments in requests:
            number = self._say(code, arguments)
            if not number:
                return False
            if code in REST:
                self._asked[number % 65536] = code
        return True

    def _listen(self, wait_s: float) -> bool:
        """Hear answers for a while, or until all are there; return whether the port is."""
        end_s = time.monotonic() + wait_s
        while self._open and time.monotonic() < end_s:
            try:
                data = self._port.read()
            except PortLostError:
                return False
            for piece in self._unwrapper.feed(data):
                if isinstance(piece, bytes) and piece[0] == MessageType.REPLY:
                    self._hear(piece)
        return True

    def _hear(self, message: bytes) -> None:
        try:
            reply = parse_message(message)
        except MessageError:
            return
        if not isinstance(reply, Reply) or self._asked.get(reply.request) != reply.code:
            return
        if is_confirmed(reply.status):
            self._open.discard(CommandCode(reply.code))


def _untold() -> str:
    return (
        "the port is gone, so that the drive could not be told to rest; a board brings it to rest by "
        f"itself once it has heard nothing for {_SILENCE_S} s"
    )


def _unconfirmed() -> str:
    return f"the board has not confirmed within {_WAIT_S:g} s that its drive is at rest: look whether it is"
