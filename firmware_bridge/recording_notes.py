"""What stands in a recording beside its samples: stamps, joins, remarks, notes of the board, the end."""

from firmware_bridge.host_note import End, Join, Pieces, Remark, Stamp, parse_host_note
from firmware_bridge.message import Note, parse_message
from firmware_bridge.message_head import MessageError, MessageType

__all__ = ["RecordingNotes"]


class RecordingNotes:
    """Collect the messages beside samples in the order of the file."""

    def __init__(self) -> None:
        self._pieces = Pieces()
        self.stamps: list[Stamp] = []
        """The host's clock beside the board's counting."""
        self.texts: list[Note | Remark] = []
        """What the board and the host said to people."""
        self.joins: dict[int, Join] = {}
        """Where each stream stands."""
        self.end: End | None = None
        """Where the recording ended as asked."""
        self.lock_ins = 0
        """Lock-in results."""
        self.damaged = 0
        """Messages whose content does not fit."""

    def take(self, message: bytes) -> None:
        """Take one message; count it where it does not fit.

        Parameters
        ----------
        message : bytes
            Content and CRC, or a piece of them.
        """
        try:
            if message[0] == MessageType.PIECE:
                whole = self._pieces.put(message)
                if whole is not None:
                    self.take(whole)
            elif message[0] < MessageType.PIECE:
                self._of_board(message)
            else:
                self._of_host(message)
        except MessageError:
            self.damaged += 1

    def maybe_origin(self, stream: int) -> int | None:
        """Return where the recording begins by the counting of a stream.

        Parameters
        ----------
        stream : int
            Stream id.

        Returns
        -------
        int or None
            The board's index of the grid's first sample, None without a join.
        """
        join = self.joins.get(stream)
        return None if join is None else join.index - join.grid

    def _of_board(self, message: bytes) -> None:
        self.lock_ins += message[0] == MessageType.LOCK_IN
        if message[0] == MessageType.NOTE:
            note = parse_message(message)
            assert isinstance(note, Note)  # noqa: S101  # the type byte says so
            self.texts.append(note)

    def _of_host(self, message: bytes) -> None:
        match parse_host_note(message):
            case Stamp() as stamp:
                self.stamps.append(stamp)
            case Join() as join:
                self.joins[join.stream] = join
            case End() as end:
                self.end = end
            case Remark() as remark:
                self.texts.append(remark)
