"""The envelope of every message: CRC-32 at its end, COBS around it, a zero byte on both sides."""

from dataclasses import dataclass
from zlib import crc32

import numpy as np
from numpy.typing import NDArray

from firmware_bridge.cobs import decode, encode, encode_rows

__all__ = [
    "MESSAGE_MAX",
    "SEALED",
    "Discarded",
    "Unwrapper",
    "seal",
    "seal_rows",
    "wrap",
    "wrap_rows",
]

MESSAGE_MAX = 1 << 20
"""Longest message [bytes], CRC included."""

SEALED = 0x2144DF1C
"""CRC-32 of any message together with its own CRC-32 (little-endian) behind it."""

_STUFFED_MAX = MESSAGE_MAX + MESSAGE_MAX // 254 + 1
_BATCH_BYTES = 1 << 18  # the temporaries of one batch stay in the processor's cache


@dataclass(frozen=True, slots=True)
class Discarded:
    """Bytes that arrived and were not kept.

    Parameters
    ----------
    count : int
        Number of bytes on the wire, delimiters not counted.
    reason : str
        Why, in words.
    """

    count: int
    reason: str

    @classmethod
    def message(cls, message: bytes, reason: str) -> "Discarded":
        """Return a whole message as it is thrown away.

        Parameters
        ----------
        message : bytes
            Content and CRC.
        reason : str
            Why, in words.

        Returns
        -------
        Discarded
            As long as the message was on the wire.
        """
        return cls(len(encode(message)), reason)


def seal(content: bytes) -> bytes:
    """Return ``content`` with its CRC-32 behind it.

    Parameters
    ----------
    content : bytes
        Content of a message.

    Returns
    -------
    bytes
        Four bytes longer.
    """
    return content + crc32(content).to_bytes(4, "little")


def wrap(content: bytes) -> bytes:
    """Return ``content`` as it goes over the wire: sealed, stuffed, between two zero bytes.

    Parameters
    ----------
    content : bytes
        Content of a message.

    Returns
    -------
    bytes
        ``00`` stuffed message ``00``.
    """
    return b"\0" + encode(seal(content)) + b"\0"


def seal_rows(contents: NDArray[np.uint8]) -> NDArray[np.uint8]:
    """Return messages of one length, each with its CRC-32 behind it.

    Parameters
    ----------
    contents : ndarray, shape (messages, length)
        One message a row.

    Returns
    -------
    ndarray, shape (messages, length + 4)
        Sealed.
    """
    count, length = contents.shape
    rows = np.empty((count, length + 4), np.uint8)
    rows[:, :length] = contents
    view = rows.reshape(-1).data
    starts = range(0, rows.size, length + 4)
    checks = np.array([crc32(view[k : k + length]) for k in starts], "<u4")
    rows[:, length:] = checks.view(np.uint8).reshape(count, 4)
    return rows


def wrap_rows(contents: NDArray[np.uint8]) -> bytes:
    """Return messages of one length as they go over the wire, as `wrap` does for one.

    Parameters
    ----------
    contents : ndarray, shape (messages, length)
        One message a row.

    Returns
    -------
    bytes
        All of them, one behind the other.
    """
    batch = max(1, _BATCH_BYTES // (contents.shape[1] + 7))
    return b"".join(
        encode_rows(seal_rows(contents[k : k + batch])) for k in range(0, len(contents), batch)
    )


class Unwrapper:
    """Turn bytes, in whatever pieces they come, into the sealed messages among them.

    A message is kept if its bytes and the zero bytes on both sides arrived intact; everything
    else is counted. Content never raises.
    """

    def __init__(self) -> None:
        self._rest = bytearray()
        self._skipped = 0  # bytes of a piece that is already longer than any message

    def feed(self, data: bytes) -> list[bytes | Discarded]:
        """Return the messages (CRC included) and the discarded pieces that ``data`` completes.

        Parameters
        ----------
        data : bytes
            Any bytes.

        Returns
        -------
        list of bytes or Discarded
            In the order of arrival.
        """
        first, *others = data.split(b"\0")
        self._hold(first)
        if not others:
            return []
        out: list[bytes | Discarded] = []
        if self._skipped:
            out.append(self._too_long())
        elif self._rest:
            out.append(_opened(bytes(self._rest)))
            self._rest.clear()
        out.extend(_opened(piece) for piece in others[:-1] if piece)
        self._hold(others[-1])
        return out

    def close(self) -> list[bytes | Discarded]:
        """Return what is left: bytes with no delimiter behind them, which count as discarded.

        Returns
        -------
        list of Discarded
            At most one.
        """
        if self._skipped:
            return [self._too_long()]
        left = len(self._rest)
        self._rest.clear()
        return [Discarded(left, "unfinished: no delimiter behind it")] if left else []

    def _hold(self, piece: bytes) -> None:
        if self._skipped or len(self._rest) + len(piece) > _STUFFED_MAX:
            self._skipped += len(self._rest) + len(piece)
            self._rest.clear()
        else:
            self._rest += piece

    def _too_long(self) -> Discarded:
        skipped, self._skipped = self._skipped, 0
        return _longer_than_allowed(skipped)


def _longer_than_allowed(count: int) -> Discarded:
    return Discarded(count, f"longer than any message ({MESSAGE_MAX} bytes)")


def _opened(piece: bytes) -> bytes | Discarded:
    if len(piece) > _STUFFED_MAX:
        return _longer_than_allowed(len(piece))
    message = decode(piece)
    if message is None:
        return Discarded(len(piece), "damaged: byte stuffing does not fit")
    if crc32(message) != SEALED or len(message) < 8:
        return Discarded(len(piece), "damaged: CRC does not fit")
    return message
