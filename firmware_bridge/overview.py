"""A recording of any length in a thousand columns: lowest and highest value of each."""

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from firmware_bridge.trace import Recording

__all__ = ["Overview", "overview_of"]

_COLUMNS = 1000


@dataclass(frozen=True, eq=False, slots=True)
class Overview:
    """What each channel did, column by column.

    Parameters
    ----------
    edges_s : ndarray, shape (columns + 1,)
        Times between which a column lies [s].
    low, high : ndarray, shape (channels, columns)
        Lowest and highest value, in channel units; NaN where a column has none.
    missing : ndarray, shape (channels, columns)
        Values that are not there, over-range ones included.
    samples : ndarray, shape (columns,)
        Samples that a column stands for.
    """

    edges_s: NDArray[np.float64]
    low: NDArray[np.float64]
    high: NDArray[np.float64]
    missing: NDArray[np.int64]
    samples: NDArray[np.int64]


def overview_of(recording: Recording, columns: int = _COLUMNS) -> Overview:
    """Return the overview of a recording, read once in bounded memory.

    Parameters
    ----------
    recording : Recording
        Any with at least one sample.
    columns : int
        At most so many; no more than there are samples.

    Returns
    -------
    Overview
        All channels.
    """
    columns = max(1, min(columns, recording.length))
    starts = np.arange(columns + 1, dtype=np.int64) * recording.length // columns
    shape = (len(recording.channels), columns)
    low, high = np.full(shape, np.inf), np.full(shape, -np.inf)
    missing = np.zeros(shape, dtype=np.int64)
    for block in recording.blocks():
        _add(block.start_index, block.values, starts, low, high, missing)
    empty = low > high
    low[empty] = high[empty] = np.nan
    return Overview(starts / recording.rate_hz, low, high, missing, np.diff(starts))


def _add(
    start: int,
    values: NDArray[np.float64],
    starts: NDArray[np.int64],
    low: NDArray[np.float64],
    high: NDArray[np.float64],
    missing: NDArray[np.int64],
) -> None:
    """Take in one block: each column's part of it by reduceat."""
    first = int(np.searchsorted(starts, start, side="right")) - 1
    last = int(np.searchsorted(starts, start + len(values), side="left"))
    cuts = np.maximum(starts[first:last], start) - start
    absent = np.isnan(values)
    part = slice(first, last)
    lowest = np.minimum.reduceat(np.where(absent, np.inf, values), cuts, axis=0).T
    highest = np.maximum.reduceat(np.where(absent, -np.inf, values), cuts, axis=0).T
    np.minimum(low[:, part], lowest, out=low[:, part])
    np.maximum(high[:, part], highest, out=high[:, part])
    missing[:, part] += np.add.reduceat(absent, cuts, axis=0, dtype=np.int64).T
