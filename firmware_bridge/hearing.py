"""What is heard in the bytes that arrive: the messages of a board, or its lines of text."""

import time
from typing import NamedTuple, Protocol

from firmware_bridge.board_answers import MEASURED, BoardAnswers
from firmware_bridge.byte_queue import Arrival
from firmware_bridge.envelope import Unwrapper
from firmware_bridge.line_frames import Piece
from firmware_bridge.message_head import MessageType
from firmware_bridge.sink import Sink
from firmware_bridge.text_frames import TextFramer

__all__ = ["FrameHearing", "Heard", "Hearing", "TextHearing"]


class Heard(NamedTuple):
    """What was in some bytes.

    Parameters
    ----------
    is_valid : bool
        Whether a valid message or line ended in them.
    is_measured : bool
        Whether one of them was what is recorded, not only an answer.
    is_echo : bool
        Whether our own commands came back in them.
    """

    is_valid: bool
    is_measured: bool
    is_echo: bool


class Hearing(Protocol):
    """Hand what arrives to a `Sink`, piece by piece."""

    def take(self, arrival: Arrival) -> Heard:
        """Hand on what the bytes complete.

        Parameters
        ----------
        arrival : Arrival
            Bytes, and when they came.

        Returns
        -------
        Heard
            What was in them.
        """

    def tick(self, monotonic_ns: int, unix_ns: int) -> None:
        """Hand on what is due by time.

        Parameters
        ----------
        monotonic_ns, unix_ns : int
            The host's clocks now.
        """

    def lost(self) -> None:
        """Hand on what the end of the port has cut."""

    def back(self) -> None:
        """Take note that the port was opened again."""

    def finish(self) -> None:
        """Hand on what waits: nothing more will come."""


class FrameHearing:
    """Messages of a board that sends frames.

    Parameters
    ----------
    intake : Sink
        Where they go.
    answers : BoardAnswers
        Who hears replies and says what is wanted.
    """

    def __init__(self, intake: Sink, answers: BoardAnswers) -> None:
        self._intake, self._answers = intake, answers
        self._unwrapper = Unwrapper()

    def take(self, arrival: Arrival) -> Heard:
        """Hand on the messages that the bytes complete; see `Hearing`."""
        pieces = self._unwrapper.feed(arrival.data)
        for piece in pieces:
            if isinstance(piece, bytes) and piece[0] == MessageType.REPLY:
                self._answers.hear(piece)
            if self._answers.is_wanted(piece):
                self._intake.take(piece, arrival.monotonic_ns, arrival.unix_ns)
        # Our own commands come back from a port that loops or echoes: they are no sign of a board.
        kinds = {piece[0] for piece in pieces if isinstance(piece, bytes)}
        others = kinds - {MessageType.COMMAND}
        return Heard(bool(others), not others.isdisjoint(MEASURED), MessageType.COMMAND in kinds)

    def tick(self, monotonic_ns: int, unix_ns: int) -> None:
        """Messages wait for nothing."""

    def lost(self) -> None:
        """Count the message that the end of the port has cut."""
        for piece in self._unwrapper.close():
            self._intake.take(piece, time.monotonic_ns(), time.time_ns())

    def back(self) -> None:
        """Messages begin anew by themselves."""

    def finish(self) -> None:
        """Messages wait for nothing."""


class TextHearing:
    """Lines of a board that prints text.

    Parameters
    ----------
    intake : Sink
        Where they go, as frames.
    framer : TextFramer
        Makes frames of lines.
    """

    def __init__(self, intake: Sink, framer: TextFramer) -> None:
        self._intake, self._framer = intake, framer

    def take(self, arrival: Arrival) -> Heard:
        """Hand on the frames that the bytes complete; see `Hearing`."""
        before = self._framer.heard
        pieces = self._framer.feed(arrival.data, arrival.monotonic_ns * 1e-9)
        self._hand_on(pieces, arrival.monotonic_ns, arrival.unix_ns)
        is_heard = self._framer.heard > before
        return Heard(is_heard, is_heard, is_echo=False)

    def tick(self, monotonic_ns: int, unix_ns: int) -> None:
        """Hand on lines that have waited long enough; see `Hearing`."""
        self._hand_on(self._framer.tick(monotonic_ns * 1e-9), monotonic_ns, unix_ns)

    def lost(self) -> None:
        """Lines may go on behind a pause."""

    def back(self) -> None:
        """Begin a line anew."""
        self._framer.restart()

    def finish(self) -> None:
        """Hand on the lines that wait."""
        for piece in self._framer.finish():
            self._intake.take(piece, time.monotonic_ns(), time.time_ns())

    def _hand_on(self, pieces: list[Piece], monotonic_ns: int, unix_ns: int) -> None:
        for piece in pieces:
            self._intake.take(piece, monotonic_ns, unix_ns)
