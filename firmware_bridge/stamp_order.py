"""Stamps out of order: stray, late, sent twice, or of a clock that started anew."""

import numpy as np
from numpy.typing import NDArray

from firmware_bridge.gap_reason import counted

__all__ = ["usable_rows", "without_lags"]

_HAVE_NO_STAMP = "have no readable time stamp and are"
_LAG_ROWS = 64  # rows within which a late stamp must have caught up


def usable_rows(stamps_s: NDArray[np.float64], remarks: list[str]) -> NDArray[np.int64]:
    """Return the rows with a stamp, without stray stamps, up to where the clock starts anew.

    Parameters
    ----------
    stamps_s : ndarray, shape (n,)
        Time stamps [s].
    remarks : list of str
        What was left out is added here.

    Returns
    -------
    ndarray of int, shape (m,)
        The rows; their stamps never decrease.
    """
    rows = np.flatnonzero(np.isfinite(stamps_s))
    if rows.size < stamps_s.size:
        count = stamps_s.size - rows.size
        have = "has no readable time stamp and is" if count == 1 else _HAVE_NO_STAMP
        remarks.append(f"{count} of {counted(stamps_s.size, 'row')} {have} left out")
    stamps = stamps_s[rows]
    stray = _strays(stamps)
    if stray.any():
        first = rows[np.argmax(stray)] + 1
        remarks.append(
            f"{_rows(stray)} with a stray time stamp {_are(stray)} left out (first: row {first})"
        )
        rows, stamps = rows[~stray], stamps[~stray]
    backwards = np.flatnonzero(np.diff(stamps) < 0)
    if backwards.size:
        row = int(backwards[0]) + 1
        remarks.append(
            f"the time stamps go back at row {rows[row] + 1}: what stands before it is read "
            f"({counted(row, 'row')}), the rest is not ({counted(rows.size - row, 'row')})"
        )
        rows = rows[:row]
    return rows


def _strays(stamps: NDArray[np.float64]) -> NDArray[np.bool_]:
    """Return which stamps alone break the order of their neighbours."""
    before = np.concatenate(([-np.inf], stamps[:-1]))
    after = np.concatenate((stamps[1:], [np.inf]))
    ordered = before <= after
    stray = ordered & ((stamps > after) | (stamps < before))
    # Of two neighbours that break the order between them, the earlier one is the stray.
    stray[1:] &= ~stray[:-1]
    return np.asarray(stray)


def without_lags(
    index: NDArray[np.int64], step_s: float, remarks: list[str]
) -> tuple[NDArray[np.int64], NDArray[np.bool_]]:
    """Leave out samples sent twice, and move late stamps back to where their samples were taken.

    A stamp may be late but never early: what is missing so far is the least of what the stamps
    soon after say. After a duplicate that is for good less than it was before.

    Parameters
    ----------
    index : ndarray of int, shape (n,)
        Places on the grid as the stamps say.
    step_s : float
        Time between samples [s].
    remarks : list of str
        What was done is added here.

    Returns
    -------
    tuple of (ndarray of int, ndarray of bool), shape (n,)
        Places, and which rows are kept; the places of these strictly increase.
    """
    kept = np.ones(index.size, dtype=bool)
    still = np.diff(index) <= 0
    if not still.any():
        return index, kept
    missing = index - np.arange(index.size)
    before = _least_ahead(missing[::-1])[::-1]
    kept[1:] = ~(still & (_least_ahead(missing)[1:] < before[:-1]))
    if not kept.all():
        repeat = "repeats" if np.count_nonzero(~kept) == 1 else "repeat"
        remarks.append(f"{_rows(~kept)} {repeat} a time stamp and {_are(~kept)} left out")
    index = index[kept]
    rows = np.arange(index.size)
    placed = np.maximum.accumulate(_least_ahead(index - rows)) + rows
    late = int(np.count_nonzero(placed != index))
    if late:
        worst = float(np.abs(index - placed).max()) * step_s
        be = "is" if late == 1 else "are"
        remarks.append(
            f"{counted(late, 'time stamp')} {be} late, by up to {worst:.3g} s; the samples are put back"
        )
    whole = np.zeros(kept.size, dtype=np.int64)
    whole[kept] = placed
    return whole, kept


def _least_ahead(values: NDArray[np.int64]) -> NDArray[np.int64]:
    """Return the least of each value and those that follow soon."""
    padded = np.concatenate((values, np.repeat(values[-1], _LAG_ROWS)))
    windows = np.lib.stride_tricks.sliding_window_view(padded, _LAG_ROWS + 1)
    return np.asarray(windows.min(axis=1))


def _rows(marked: NDArray[np.bool_]) -> str:
    return counted(int(np.count_nonzero(marked)), "row")


def _are(marked: NDArray[np.bool_]) -> str:
    return "is" if np.count_nonzero(marked) == 1 else "are"
