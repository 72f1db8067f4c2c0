"""Consistent overhead byte stuffing: a message without zero bytes, so that zero can delimit it.

References
----------
S. Cheshire and M. Baker, *Consistent Overhead Byte Stuffing*, IEEE/ACM Transactions on Networking
7 (1999) 159–172. A last run of exactly 254 bytes gets no further code byte.
"""

import contextlib
import re
from itertools import pairwise

import numpy as np
from numpy.typing import NDArray

__all__ = ["decode", "encode", "encode_rows"]

_RUN = 254  # longest run of non-zero bytes behind one code byte
_FULL = 255  # its code; no zero follows such a run
_ZEROS = (
    b"\1" * 24
)  # longer ones are counted faster; where stretches of zeros this long are half of a message, they are taken whole
_ONES = re.compile(rb"\x01+")


def encode(data: bytes) -> bytes:
    """Return one stuffed message, without delimiters.

    Parameters
    ----------
    data : bytes
        Any bytes.

    Returns
    -------
    bytes
        No zero byte in it; at most one byte in 254 longer, plus one.
    """
    *inner, last = data.split(b"\0")
    out = bytearray()
    for run in inner:
        whole = len(run) // _RUN * _RUN
        out += _full_runs(run[:whole])
        out.append(len(run) - whole + 1)
        out += run[whole:]
    whole = max(0, len(last) - 1) // _RUN * _RUN
    out += _full_runs(last[:whole])
    out.append(len(last) - whole + 1)
    out += last[whole:]
    return bytes(out)


def _full_runs(data: bytes) -> bytes:
    return b"".join(b"\xff" + data[k : k + _RUN] for k in range(0, len(data), _RUN))


def encode_rows(rows: NDArray[np.uint8]) -> bytes:
    """Return many messages of one length, each stuffed and between two zero bytes.

    Parameters
    ----------
    rows : ndarray, shape (messages, length)
        One message a row; at least one row.

    Returns
    -------
    bytes
        ``00`` stuffed ``00`` for each row, one behind the other.
    """
    count, length = rows.shape
    width = length + 3  # delimiter, first code byte, message, delimiter
    flat = np.ones((count, width), np.uint8)
    flat[:, 1] = 0  # the first code byte stands where a zero before the message would
    flat[:, 2:-1] = rows
    flat = flat.reshape(-1)
    zeros = np.flatnonzero(flat == 0)
    ends = np.zeros(zeros.size, bool)  # runs that the closing delimiter ends, not a zero
    ends[np.searchsorted(zeros, np.arange(1, count) * width + 1) - 1] = True
    ends[-1] = True
    runs = np.diff(zeros, append=flat.size + 1) - 1
    runs[ends] -= 2  # next row's code byte stands two places behind this row's delimiter
    flat[::width] = flat[width - 1 :: width] = 0
    flat[zeros] = np.minimum(runs + 1, _FULL)
    long = np.flatnonzero(runs >= _RUN)
    if long.size:
        flat = _with_inner_codes(flat, zeros[long], runs[long], ends[long])
    return flat.tobytes()


def _with_inner_codes(
    flat: NDArray[np.uint8],
    starts: NDArray[np.int64],
    runs: NDArray[np.int64],
    ends: NDArray[np.bool_],
) -> NDArray[np.uint8]:
    inner = (runs - ends) // _RUN
    total = int(inner.sum())
    behind = np.cumsum(inner)
    nth = np.arange(total) - np.repeat(behind - inner, inner)
    places = np.repeat(starts, inner) + _RUN + 1 + _RUN * nth
    codes = np.full(total, _FULL)
    some = inner > 0
    codes[behind[some] - 1] = (runs - _RUN * inner + 1)[some]
    return np.insert(flat, places, codes.astype(np.uint8))


def decode(stuffed: bytes) -> bytes | None:
    """Return the message of what stood between two delimiters, or None if no code chain fits it.

    Parameters
    ----------
    stuffed : bytes
        Without delimiters; not empty.

    Returns
    -------
    bytes or None
        The message; None where a code byte points beyond the end.
    """
    if 0 in stuffed:
        return None
    data = bytearray(stuffed)
    if stuffed.count(_ZEROS) * (2 * len(_ZEROS)) > len(data):
        ends = _walk_zeros(data)
    else:
        ends = [_walk(data)]
        if data.count(_FULL) != stuffed.count(_FULL):  # some were codes: of full runs
            data = bytearray(stuffed)
            ends = _walk_full(data)
    if ends[-1] != len(data):
        return None
    if len(ends) == 1:
        return bytes(memoryview(data)[1:])
    return b"".join([data[a + 1 : b] for a, b in pairwise([0, *ends])])


# Each code byte becomes the zero it stands for, except behind a full run. One step a zero of the
# message, some 30 ns; running off the end costs less than asking for it at each step.


def _walk(data: bytearray) -> int:
    """Walk as if no run were full; return where the chain of codes ended."""
    place = 0
    try:
        while True:  # four steps a turn: a tenth of the time is the loop's own
            code = data[place]
            data[place] = 0
            place += code
            code = data[place]
            data[place] = 0
            place += code
            code = data[place]
            data[place] = 0
            place += code
            code = data[place]
            data[place] = 0
            place += code
    except IndexError:
        return place


def _walk_full(data: bytearray) -> list[int]:
    """Return where full runs end, and last where the chain of codes ended."""
    place, full, ends = 0, _FULL, []
    with contextlib.suppress(IndexError):
        while True:
            code = data[place]
            data[place] = 0
            place += code
            if code == full:
                ends.append(place)
    return ends if ends and ends[-1] == place else [*ends, place]


def _walk_zeros(data: bytearray) -> list[int]:
    """Do as `_walk_full`, each stretch of codes that stand for one zero each in one step."""
    place, ends = 0, []
    with contextlib.suppress(IndexError):
        while True:
            code = data[place]
            if code == 1:
                stretch = _ONES.match(data, place)
                end = place + 1 if stretch is None else stretch.end()
                data[place:end] = bytes(end - place)
                place = end
                continue
            data[place] = 0
            place += code
            if code == _FULL:
                ends.append(place)
    return ends if ends and ends[-1] == place else [*ends, place]
