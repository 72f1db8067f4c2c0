"""What a board answers to commands about its drive and lock-in, and what follows from it."""

from firmware_bridge.drive_desk import DriveDesk
from firmware_bridge.drive_lines import DriveError
from firmware_bridge.envelope import Discarded
from firmware_bridge.lock_in_start import LockInError, LockInStart
from firmware_bridge.message import CommandCode, Reply, parse_message
from firmware_bridge.message_head import MessageError, MessageType
from firmware_bridge.port_watch import PortWatch
from firmware_bridge.samples_frame import place_of

__all__ = ["MEASURED", "BoardAnswers"]

MEASURED = (MessageType.SAMPLES, MessageType.LOCK_IN)
"""Types of the messages that are recorded, not only answers."""


class BoardAnswers:
    """Hear replies; say which messages are wanted once the drive has been confirmed.

    Parameters
    ----------
    watch : PortWatch
        Who is told what the board says.
    desk : DriveDesk, optional
        Who wants drive lines of the board.
    lock_in : LockInStart, optional
        What the board was asked for instead of samples.
    """

    def __init__(
        self, watch: PortWatch, desk: DriveDesk | None, lock_in: LockInStart | None
    ) -> None:
        self._watch, self._desk, self._lock_in = watch, desk, lock_in

    def hear(self, message: bytes) -> None:
        """Hear a reply.

        Parameters
        ----------
        message : bytes
            Content and CRC.

        Raises
        ------
        LockInError
            If the board refuses the lock-in.
        DriveError
            If it refuses a drive line, without a watcher.
        """
        try:
            reply = parse_message(message)
        except MessageError:
            return
        if not isinstance(reply, Reply):
            return
        if self._lock_in is not None and reply.code == CommandCode.START and reply.status:
            reason = reply.text or "it has none"
            raise LockInError(f"{self._watch.name}: the board refuses the lock-in: {reason}")
        if self._desk is not None:
            self._tell(self._desk.heard(reply))

    def is_wanted(self, piece: bytes | Discarded) -> bool:
        """Return whether a piece is to be kept.

        Parameters
        ----------
        piece : bytes or Discarded
            Content and CRC, or what was thrown away.

        Returns
        -------
        bool
            False for what is measured before the drive is as wanted: it would spoil every fit.

        Raises
        ------
        DriveError
            If the board does not answer.
        """
        if self._desk is None or not (isinstance(piece, bytes) and piece[0] in MEASURED):
            return True
        try:
            is_samples = piece[0] == MessageType.SAMPLES
            return self._desk.is_settled(place_of(piece) if is_samples else None)
        except DriveError as error:
            raise DriveError(f"{self._watch.name}: {error}") from None

    def away(self) -> None:
        """Take note that the port was away."""
        if self._desk is not None:
            self._desk.away()

    def _tell(self, answer: tuple[str, bool] | None) -> None:
        if answer is not None and answer[1]:
            self._watch.refused(answer[0])
        elif answer is not None:
            self._watch.obeyed(answer[0])
