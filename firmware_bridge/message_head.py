"""What every message but samples begins with: its type, the version of the wire, its length.

Each is ``type u8 | version u8 | length of the body u16 | body``, little-endian, in its envelope.
"""

import struct
from enum import IntEnum

from firmware_bridge.errors import BridgeError

__all__ = ["BODY_MAX", "WIRE_VERSION", "MessageError", "MessageType", "body_of", "pack"]

WIRE_VERSION = 1
BODY_MAX = 0xFFFF

_HEAD = struct.Struct("<BBH")


class MessageError(BridgeError):
    """A message that cannot be written as the wire asks, or whose body does not fit its type."""


class MessageType(IntEnum):
    """First byte of a message; from 0x40 on only in recordings, written by the host."""

    SAMPLES = 0x01
    ANNOUNCEMENT = 0x02
    COMMAND = 0x03
    REPLY = 0x04
    LOCK_IN = 0x05
    NOTE = 0x06
    PIECE = 0x40
    STAMP = 0x41
    JOIN = 0x42
    REMARK = 0x43
    END = 0x44


def pack(kind: int, body: bytes) -> bytes:
    """Return a message of type ``kind`` without its envelope.

    Parameters
    ----------
    kind : int
        Of `MessageType`.
    body : bytes
        As its type asks.

    Returns
    -------
    bytes
        Content, without CRC.

    Raises
    ------
    MessageError
        If the body is longer than `BODY_MAX` bytes.
    """
    if len(body) > BODY_MAX:
        raise MessageError(f"a message body must have ≤ {BODY_MAX} bytes, got {len(body)}")
    return _HEAD.pack(kind, WIRE_VERSION, len(body)) + body


def body_of(message: bytes) -> bytes:
    """Return the body of a sealed message, or of one padded with zeros in a recording.

    Parameters
    ----------
    message : bytes
        Content and CRC, perhaps padded.

    Returns
    -------
    bytes
        The body.

    Raises
    ------
    MessageError
        If its length field reaches beyond the message.
    """
    if len(message) < _HEAD.size + 4:
        raise MessageError(f"a message of {len(message)} bytes is too short")
    length = _HEAD.unpack_from(message)[2]
    if _HEAD.size + length + 4 > len(message):
        raise MessageError(f"a body of {length} bytes does not fit a message of {len(message)}")
    return message[_HEAD.size : _HEAD.size + length]
