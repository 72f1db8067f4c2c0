"""A sealed frame beside the announcement of its stream: whether it fits, and how it is shortened."""

from firmware_bridge.announcement import Announcement
from firmware_bridge.envelope import seal
from firmware_bridge.frame import HEADER
from firmware_bridge.samples_frame import Samples

__all__ = ["fits", "is_alike", "shortened"]

_FILLED = HEADER.fields["filled"][1] if HEADER.fields else 0


def is_alike(a: Announcement, b: Announcement) -> bool:
    """Return whether frames of both can stand in one file.

    Parameters
    ----------
    a, b : Announcement
        Of any streams.

    Returns
    -------
    bool
        True where rate, format, slots and channels are the same.
    """
    return (a.rate_hz, a.format, a.slots, a.channels) == (b.rate_hz, b.format, b.slots, b.channels)


def fits(message: bytes, announcement: Announcement) -> bool:
    """Return whether a frame is as its stream was announced.

    Parameters
    ----------
    message : bytes
        Content and CRC of a samples frame.
    announcement : Announcement
        Of its stream.

    Returns
    -------
    bool
        True also for fewer slots than announced: it is kept in a record of the full length.
    """
    width, channels = _shape(message)
    slots = int.from_bytes(message[14:16], "little")
    announced = announcement.code_limits[1].bit_length() // 8 + 1
    return (
        channels == len(announcement.channels)
        and width == announced
        and slots <= announcement.slots
    )


def shortened(message: bytes, filled: int, frame: Samples) -> bytes:
    """Return the frame with only its first samples, the others zero.

    Parameters
    ----------
    message : bytes
        Content and CRC of a samples frame.
    filled : int
        Samples to keep, fewer than it has.
    frame : Samples
        The message, parsed.

    Returns
    -------
    bytes
        Sealed anew.
    """
    width, channels = _shape(message)
    content = bytearray(message[:-4])
    content[_FILLED : _FILLED + 2] = filled.to_bytes(2, "little")
    start = HEADER.itemsize + filled * channels * width
    stop = HEADER.itemsize + len(frame.data) * channels * width
    content[start:stop] = bytes(stop - start)
    return seal(bytes(content))


def _shape(message: bytes) -> tuple[int, int]:
    """Return the bytes of a value and the number of channels."""
    return message[13], message[12]
