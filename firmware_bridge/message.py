"""The messages beside samples: commands, replies, lock-in results and notes."""

import struct
from dataclasses import dataclass
from enum import IntEnum

from firmware_bridge.envelope import wrap
from firmware_bridge.message_head import MessageError, MessageType, body_of, pack

__all__ = [
    "Command",
    "CommandCode",
    "LockIn",
    "Note",
    "Reply",
    "encode_command",
    "encode_lock_in",
    "encode_note",
    "encode_reply",
    "parse_message",
]

_COMMAND = struct.Struct("<HBB")
_LOCK_IN = struct.Struct("<IQIBBH")
_LOCK_IN_LINE = struct.Struct("<Iqq")


class CommandCode(IntEnum):
    """What the host asks of the board."""

    IDENTIFY = 1
    START = 2
    STOP = 3
    RATE = 4
    SET_LINE = 5
    CLEAR_LINE = 6
    RAMP = 7
    KEEP_ALIVE = 8


@dataclass(frozen=True, slots=True)
class Note:
    """Text from the board, for people.

    Parameters
    ----------
    text : str
        One line.
    """

    text: str


@dataclass(frozen=True, slots=True)
class Command:
    """A request of the host: ``code`` of `CommandCode`, ``request`` comes back in the reply."""

    code: int
    request: int = 0
    arguments: bytes = b""


@dataclass(frozen=True, slots=True)
class Reply:
    """The board's answer: ``status`` 0 done, 1 unknown command, 2 refused; ``text`` says why."""

    code: int
    request: int = 0
    status: int = 0
    text: str = ""


@dataclass(frozen=True, slots=True)
class LockIn:
    """Lines that the board itself accumulated over ``length`` samples of one channel.

    Parameters
    ----------
    stream : int
        Stream id.
    index, length : int
        First sample and number of samples accumulated.
    channel : int
        Channel, from 0.
    shift : int
        The carriers are cosines and sines of amplitude 2^shift.
    lines : tuple of (int, int, int)
        For each line the phase step (frequency = step · rate / 2^32) and the sums
        Σ x·cos and Σ x·sin over carrier phases counted from sample index 0.
    """

    stream: int
    index: int
    length: int
    channel: int
    shift: int
    lines: tuple[tuple[int, int, int], ...]


def encode_note(text: str) -> bytes:
    """Return a note of the board as it goes over the wire.

    Parameters
    ----------
    text : str
        For people.

    Returns
    -------
    bytes
        Envelope included.
    """
    return wrap(pack(MessageType.NOTE, text.encode()))


def encode_command(code: int, request: int = 0, arguments: bytes = b"") -> bytes:
    """Return a command as it goes over the wire.

    Parameters
    ----------
    code : int
        Of `CommandCode`.
    request : int
        0..65535; the reply carries it.
    arguments : bytes
        From `firmware_bridge.arguments`; empty for identify, stop and keep-alive, and for start
        unless it asks for more than samples.

    Returns
    -------
    bytes
        Envelope included.
    """
    return wrap(pack(MessageType.COMMAND, _COMMAND.pack(request, code, 0) + arguments))


def encode_reply(reply: Reply) -> bytes:
    """Return a reply as it goes over the wire.

    Parameters
    ----------
    reply : Reply
        What to answer.

    Returns
    -------
    bytes
        Envelope included.
    """
    head = _COMMAND.pack(reply.request, reply.code, reply.status)
    return wrap(pack(MessageType.REPLY, head + reply.text.encode()))


def encode_lock_in(result: LockIn) -> bytes:
    """Return lock-in results as they go over the wire.

    Parameters
    ----------
    result : LockIn
        The sums.

    Returns
    -------
    bytes
        Envelope included.
    """
    head = _LOCK_IN.pack(
        result.stream, result.index, result.length, result.channel, result.shift, len(result.lines)
    )
    lines = b"".join(_LOCK_IN_LINE.pack(*line) for line in result.lines)
    return wrap(pack(MessageType.LOCK_IN, head + lines))


def parse_message(message: bytes) -> Note | Command | Reply | LockIn:
    """Return what a sealed message of one of these four types says.

    Parameters
    ----------
    message : bytes
        Content and CRC.

    Returns
    -------
    Note, Command, Reply or LockIn
        What it says.

    Raises
    ------
    MessageError
        If the body does not fit the type.
    """
    body = body_of(message)
    try:
        match message[0]:
            case MessageType.NOTE:
                return Note(body.decode(errors="replace"))
            case MessageType.COMMAND:
                request, code, _ = _COMMAND.unpack_from(body)
                return Command(code, request, body[_COMMAND.size :])
            case MessageType.REPLY:
                request, code, status = _COMMAND.unpack_from(body)
                return Reply(code, request, status, body[_COMMAND.size :].decode(errors="replace"))
            case MessageType.LOCK_IN:
                return _lock_in(body)
    except struct.error:
        raise MessageError(f"message type {message[0]:#04x}: the body ends too early") from None
    raise MessageError(f"message type {message[0]:#04x} is unknown")


def _lock_in(body: bytes) -> LockIn:
    stream, index, length, channel, shift, count = _LOCK_IN.unpack_from(body)
    size = _LOCK_IN_LINE.size
    starts = range(_LOCK_IN.size, _LOCK_IN.size + count * size, size)
    lines = tuple(_LOCK_IN_LINE.unpack_from(body, start) for start in starts)
    return LockIn(stream, index, length, channel, shift, lines)
