"""Samples frames: the header, the packed samples, and many frames at once.

The other messages' encoders are offered here too, so that a board written in Python needs one
import.
"""

from typing import Any

import numpy as np
from numpy.typing import ArrayLike, NDArray

from firmware_bridge.announcement import (
    FORMATS,
    Announcement,
    ChannelInfo,
    encode_announcement,
)
from firmware_bridge.envelope import MESSAGE_MAX, wrap_rows
from firmware_bridge.message import CommandCode, Reply, encode_command, encode_note, encode_reply
from firmware_bridge.message_head import WIRE_VERSION, MessageError, MessageType
from firmware_bridge.sample_packing import pack_samples

__all__ = [
    "HEADER",
    "OVERRUN",
    "OVER_RANGE",
    "Announcement",
    "ChannelInfo",
    "CommandCode",
    "Reply",
    "encode_announcement",
    "encode_command",
    "encode_frame",
    "encode_note",
    "encode_reply",
    "encode_stream",
    "pack_frames",
]

OVER_RANGE = 1
"""Flag: at least one sample of the frame is over-range."""

OVERRUN = 2
"""Flag: the board lost samples since its previous frame (the index says how many)."""

HEADER = np.dtype(
    [
        ("type", "u1"),
        ("version", "u1"),
        ("flags", "<u2"),
        ("stream", "<u4"),
        ("sequence", "<u4"),
        ("channels", "u1"),
        ("format", "u1"),
        ("slots", "<u2"),
        ("index", "<u8"),
        ("clock", "<u8"),
        ("filled", "<u2"),
        ("reserved", "<u2"),
    ]
)
"""Header of a samples frame, 36 bytes."""


def encode_frame(
    samples: ArrayLike,
    *,
    index: int,
    sequence: int,
    stream: int = 0,
    clock: int = 0,
    flags: int = 0,
    slots: int | None = None,
    format: str | None = None,  # noqa: A002  # the word of the wire
) -> bytes:
    """Return one samples frame as it goes over the wire, delimiters on both sides included.

    Parameters
    ----------
    samples : ndarray of int16 or int32, shape (n, channels)
        Counts; shape (n,) is one channel.
    index : int
        Index of the first sample, 0..2^64−1, counted from the board's start.
    sequence : int
        Frames sent before, modulo 2^32.
    stream : int
        Stream id, 0..2^32−1, new at every start of the board.
    clock : int
        Board clock at the first sample, 0..2^64−1.
    flags : int
        `OVER_RANGE`, `OVERRUN`.
    slots : int, optional
        Samples per channel the frame has room for; by default as many as there are.
    format : str, optional
        "int16", "int24" or "int32"; by default what the samples' type says.

    Returns
    -------
    bytes
        ``00`` stuffed frame ``00``.

    Raises
    ------
    MessageError
        If something does not fit its field.
    """
    counts = _as_counts(samples)
    rows = pack_frames(
        counts,
        slots=max(1, len(counts)) if slots is None else slots,
        first_index=index,
        first_sequence=sequence,
        stream=stream,
        clock=clock,
        flags=flags,
        format=format,
    )
    if len(rows) != 1:
        raise MessageError(f"a frame of {slots} slots cannot hold {len(counts)} samples")
    return wrap_rows(rows)


def encode_stream(
    samples: ArrayLike,
    *,
    slots: int,
    first_index: int = 0,
    first_sequence: int = 0,
    stream: int = 0,
    clock: int | NDArray[Any] = 0,
    ticks_per_sample: float = 0.0,
    over_range: NDArray[np.bool_] | None = None,
    format: str | None = None,  # noqa: A002
) -> bytes:
    """Return many samples frames, the same bytes as `encode_frame` gives one by one, but fast.

    Parameters
    ----------
    samples : ndarray of int16 or int32, shape (n, channels)
        Counts; shape (n,) is one channel. The last frame may be filled only in part.
    slots : int
        Samples per channel in each frame, 1..65535.
    first_index, first_sequence : int
        Of the first frame; the sequence wraps at 2^32.
    stream : int
        Stream id.
    clock : int or ndarray of int, shape (frames,)
        Board clock at the first sample of all, or of each frame.
    ticks_per_sample : float
        By how much the clock advances, where ``clock`` is one number.
    over_range : ndarray of bool, shape (n,) or (n, channels), optional
        Samples that are over-range; frames with one of them are flagged.
    format : str, optional
        As for `encode_frame`.

    Returns
    -------
    bytes
        The frames one behind the other.

    Raises
    ------
    MessageError
        If something does not fit its field.
    """
    counts = _as_counts(samples)
    if not len(counts):
        return b""
    starts = np.arange(0, len(counts), slots)
    flags: int | NDArray[Any] = 0
    if over_range is not None:
        marked = np.asarray(over_range, bool).reshape(len(counts), -1).any(axis=1)
        flags = np.logical_or.reduceat(marked, starts) * OVER_RANGE
    if ticks_per_sample:
        clock = np.uint64(clock) + np.floor(starts * ticks_per_sample).astype(np.uint64)
    return wrap_rows(
        pack_frames(
            counts,
            slots=slots,
            first_index=first_index,
            first_sequence=first_sequence,
            stream=stream,
            clock=clock,
            flags=flags,
            format=format,
        )
    )


def pack_frames(
    counts: NDArray[Any],
    *,
    slots: int,
    first_index: int,
    first_sequence: int,
    stream: int,
    clock: int | NDArray[Any],
    flags: int | NDArray[Any],
    format: str | None = None,  # noqa: A002
) -> NDArray[np.uint8]:
    """Return samples frames without their envelopes, one a row; parameters as `encode_stream`.

    Parameters
    ----------
    counts : ndarray of int, shape (n, channels)
        Counts.
    slots : int
        Samples per channel in each frame.
    first_index, first_sequence, stream : int
        Of the first frame.
    clock, flags : int or ndarray of int, shape (frames,)
        The same for all frames, or of each.
    format : str, optional
        As for `encode_frame`.

    Returns
    -------
    ndarray of uint8, shape (frames, 36 + slots · channels · width)
        Unfilled slots are zero.
    """
    n, channels = counts.shape
    width = FORMATS[_format_name(counts, format)]
    _check_fields(slots, channels, width, first_index + max(0, n - 1), stream)
    frames = max(1, -(-n // slots))
    room = slots * channels * width
    rows = np.zeros((frames, HEADER.itemsize + room), np.uint8)
    head = rows[:, : HEADER.itemsize].view(HEADER)[:, 0]
    head["type"], head["version"] = MessageType.SAMPLES, WIRE_VERSION
    head["flags"], head["stream"], head["clock"] = flags, stream, clock
    head["channels"], head["format"], head["slots"] = channels, width, slots
    number = np.arange(frames, dtype=np.uint64)
    head["sequence"] = (number + np.uint64(first_sequence % 2**32)) % np.uint64(2**32)
    head["index"] = np.uint64(first_index) + number * np.uint64(slots)
    head["filled"] = slots
    head["filled"][-1] = n - (frames - 1) * slots
    packed = pack_samples(counts, width).reshape(-1)
    whole = n // slots
    rows[:whole, HEADER.itemsize :] = packed[: whole * room].reshape(whole, room)
    if whole < frames:
        rows[-1, HEADER.itemsize : HEADER.itemsize + packed.size - whole * room] = packed[
            whole * room :
        ]
    return rows


def _as_counts(samples: ArrayLike) -> NDArray[Any]:
    counts = np.asarray(samples)
    if counts.ndim == 1:
        counts = counts[:, None]
    if counts.ndim != 2 or counts.dtype.kind not in "iu":
        raise MessageError(
            f"samples must be integers of shape (n, channels), got {counts.dtype} {counts.shape}"
        )
    return counts


def _format_name(counts: NDArray[Any], name: str | None) -> str:
    if name is None:
        return "int16" if counts.dtype == np.int16 else "int32"
    if name not in FORMATS:
        raise MessageError(f"format must be one of {', '.join(FORMATS)}, got {name!r}")
    return name


def _check_fields(slots: int, channels: int, width: int, last_index: int, stream: int) -> None:
    if not 1 <= slots <= 0xFFFF:
        raise MessageError(f"slots must be 1 to 65535, got {slots}")
    if not 1 <= channels <= 255:
        raise MessageError(f"channels must be 1 to 255, got {channels}")
    if not 0 <= stream < 2**32:
        raise MessageError(f"stream must be 0 to 2^32 - 1, got {stream}")
    if not 0 <= last_index < 2**64:
        raise MessageError(f"sample indices must be 0 to 2^64 - 1, got {last_index}")
    size = HEADER.itemsize + slots * channels * width + 4
    if size > MESSAGE_MAX:
        raise MessageError(f"a frame must have ≤ {MESSAGE_MAX} bytes, got {size}")
