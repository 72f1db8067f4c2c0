"""A samples frame as the wire has it, read: counts, index, clock and flags."""

import struct
from dataclasses import dataclass
from typing import Any

from numpy.typing import NDArray

from firmware_bridge.envelope import seal
from firmware_bridge.frame import HEADER, OVER_RANGE
from firmware_bridge.message_head import MessageError
from firmware_bridge.sample_packing import unpack_samples

__all__ = ["Samples", "parse_samples", "place_of", "renamed"]

_HEADER = struct.Struct("<BBHIIBBHQQHH")


@dataclass(eq=False, slots=True)
class Samples:
    """The samples of one frame.

    Parameters
    ----------
    index : int
        Index of the first sample, counted by the board.
    data : ndarray of int16 or int32, shape (n, channels)
        Counts.
    over_range : bool
        True if the board flagged a sample of this frame as over-range.
    clock : int
        Board clock at the first sample.
    stream, sequence, flags : int
        As in the frame.
    """

    index: int
    data: NDArray[Any]
    over_range: bool
    clock: int
    stream: int = 0
    sequence: int = 0
    flags: int = 0


def parse_samples(message: bytes) -> Samples:
    """Return the samples of one unwrapped frame.

    Parameters
    ----------
    message : bytes
        Content and CRC.

    Returns
    -------
    Samples
        What is in it.

    Raises
    ------
    MessageError
        If its fields do not fit each other.
    """
    if len(message) < _HEADER.size + 4:
        raise MessageError(f"a samples frame of {len(message)} bytes is too short")
    (_, _, flags, stream, sequence, channels, width, slots, index, clock, filled, _) = (
        _HEADER.unpack_from(message)
    )
    room = slots * channels * width
    if width not in (2, 3, 4) or not channels or filled > slots:
        raise MessageError(
            f"a samples frame with {channels} channels, format {width}, {filled} of {slots} filled"
        )
    if len(message) != _HEADER.size + room + 4:
        raise MessageError(f"a samples frame of {len(message)} bytes, its header says {room + 40}")
    end = _HEADER.size + filled * channels * width
    data = unpack_samples(message[_HEADER.size : end], channels, width)
    return Samples(index, data, bool(flags & OVER_RANGE), clock, stream, sequence, flags)


def place_of(message: bytes) -> tuple[int, int] | None:
    """Return where an unwrapped frame stands, without its samples.

    Parameters
    ----------
    message : bytes
        Content and CRC.

    Returns
    -------
    tuple of int and int, or None
        Stream id and index of the first sample; None where the header is cut short.
    """
    if len(message) < _HEADER.size:
        return None
    _, _, _, stream, _, _, _, _, index, _, _, _ = _HEADER.unpack_from(message)
    return stream, index


def renamed(message: bytes, stream: int) -> bytes:
    """Return a sealed samples frame or lock-in result under another stream id.

    Parameters
    ----------
    message : bytes
        Content and CRC.
    stream : int
        Stream id.

    Returns
    -------
    bytes
        Sealed anew.
    """
    return seal(message[:4] + stream.to_bytes(4, "little") + message[8:-4])


assert _HEADER.size == HEADER.itemsize  # noqa: S101  # one layout, written twice for speed
