"""What the host writes into a recording beside the board's messages: stamps, joins, remarks, ends."""

import struct
from collections.abc import Iterator
from dataclasses import dataclass

from firmware_bridge.envelope import seal
from firmware_bridge.message_head import MessageError, MessageType, body_of, pack

__all__ = [
    "End",
    "HostNote",
    "Join",
    "Pieces",
    "Remark",
    "Stamp",
    "cut",
    "parse_host_note",
    "seal_host_note",
]

_STAMP = struct.Struct("<QQIIQQ")
_JOIN = struct.Struct("<IIQQd")
_END = struct.Struct("<IIQ")
_PIECE = struct.Struct("<HHH")
_AROUND = 4 + 4 + _PIECE.size  # head of the message, its CRC, head of the piece


@dataclass(frozen=True, slots=True)
class Stamp:
    """When the host had received the sample before ``index`` of ``stream``.

    Parameters
    ----------
    unix_ns, monotonic_ns : int
        The host's UTC and its monotonic clock.
    stream, index : int
        Stream id and the index after the last sample received.
    clock : int
        Board clock of the last frame received.
    """

    unix_ns: int
    monotonic_ns: int
    stream: int
    index: int
    clock: int = 0


@dataclass(frozen=True, slots=True)
class Join:
    """Where a later stream stands: its sample ``index`` is sample ``grid`` of the recording.

    Parameters
    ----------
    stream, index, grid : int
        Stream id, the board's index, and the index on the recording's grid.
    grid_u : float
        Standard uncertainty of ``grid`` in samples, from the host's clock.
    """

    stream: int
    index: int
    grid: int
    grid_u: float


@dataclass(frozen=True, slots=True)
class Remark:
    """Text of the host, for people."""

    text: str


@dataclass(frozen=True, slots=True)
class End:
    """A recording that ended as asked, before sample ``index`` of ``stream``."""

    stream: int
    index: int


HostNote = Stamp | Join | Remark | End


def seal_host_note(note: HostNote) -> bytes:
    """Return the sealed message of a host note.

    Parameters
    ----------
    note : Stamp, Join, Remark or End
        What to write.

    Returns
    -------
    bytes
        Content and CRC, not padded.
    """
    match note:
        case Stamp():
            body = _STAMP.pack(
                note.unix_ns, note.monotonic_ns, note.stream, 0, note.index, note.clock
            )
            return seal(pack(MessageType.STAMP, body))
        case Join():
            body = _JOIN.pack(note.stream, 0, note.index, note.grid, note.grid_u)
            return seal(pack(MessageType.JOIN, body))
        case End():
            return seal(pack(MessageType.END, _END.pack(note.stream, 0, note.index)))
        case Remark():
            return seal(pack(MessageType.REMARK, note.text.encode()[:0xFFFF]))


def parse_host_note(message: bytes) -> HostNote:
    """Return what a sealed host note says.

    Parameters
    ----------
    message : bytes
        Content and CRC; padding behind it is ignored.

    Returns
    -------
    Stamp, Join, Remark or End
        What it says.

    Raises
    ------
    MessageError
        If it is none, or its body does not fit its type.
    """
    body = body_of(message)
    try:
        match message[0]:
            case MessageType.STAMP:
                unix_ns, monotonic_ns, stream, _, index, clock = _STAMP.unpack_from(body)
                return Stamp(unix_ns, monotonic_ns, stream, index, clock)
            case MessageType.JOIN:
                stream, _, index, grid, grid_u = _JOIN.unpack_from(body)
                return Join(stream, index, grid, grid_u)
            case MessageType.END:
                stream, _, index = _END.unpack_from(body)
                return End(stream, index)
            case MessageType.REMARK:
                return Remark(body.decode(errors="replace"))
    except struct.error:
        raise MessageError(f"host note {message[0]:#04x}: the body ends too early") from None
    raise MessageError(f"message type {message[0]:#04x} is no host note")


def cut(message: bytes, number: int, record_bytes: int) -> Iterator[bytes]:
    """Yield a sealed message that is longer than a record as sealed pieces that fit.

    Parameters
    ----------
    message : bytes
        Sealed.
    number : int
        Tells the pieces of one message from those of the next, modulo 65536.
    record_bytes : int
        Length of a record, at least 64.

    Yields
    ------
    bytes
        Sealed piece, at most ``record_bytes`` long.
    """
    room = record_bytes - _AROUND
    starts = range(0, len(message), room)
    for k, start in enumerate(starts):
        head = _PIECE.pack(number % 65536, k, len(starts))
        yield seal(pack(MessageType.PIECE, head + message[start : start + room]))


class Pieces:
    """Put the pieces of `cut` together again."""

    def __init__(self) -> None:
        self._number = -1
        self._parts: list[bytes] = []

    def put(self, message: bytes) -> bytes | None:
        """Take one sealed piece; return the whole message when it was the last one.

        Parameters
        ----------
        message : bytes
            Content and CRC; padding behind it is ignored.

        Returns
        -------
        bytes or None
            The whole sealed message, None until its last piece.
        """
        body = body_of(message)
        if len(body) < _PIECE.size:
            return None
        number, k, count = _PIECE.unpack_from(body)
        if number != self._number or k != len(self._parts):
            self._number, self._parts = number, []
        if k != len(self._parts):
            return None  # its first piece is damaged or missing
        self._parts.append(body[_PIECE.size :])
        if k + 1 < count:
            return None
        whole, self._parts = b"".join(self._parts), []
        return whole
