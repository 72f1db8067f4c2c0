"""Turning points: where a record turns by more than a band of hysteresis.

Noise and small vibration turn a record at every sample; what counts as a turn is one after which the
record comes back by more than the band.
"""

import numpy as np
from numpy.typing import NDArray

__all__ = ["turning_points"]


def turning_points(values: NDArray[np.float64], band: float) -> NDArray[np.int64]:
    """Return where a record turns, maxima and minima in alternation.

    Parameters
    ----------
    values : ndarray, shape (n,)
        Record, any unit, no NaN.
    band : float
        Hysteresis, same unit: swings smaller than this are none; > 0.

    Returns
    -------
    ndarray of int, shape (k,)
        Indices of the turning points. The two ends of the record are none; the first and the last
        stretch may be shorter than the band.

    Notes
    -----
    The swings between neighbouring extremes are taken away in order of size: each round drops every
    swing below the band that is no larger than both its neighbours, together with its two extremes.
    """
    count = len(values)
    if count < 3:
        return np.zeros(0, dtype=np.int64)
    moving = np.concatenate([[True], np.diff(values) != 0.0])
    place = np.flatnonzero(moving)
    level = values[place]
    if len(place) < 3:
        return np.zeros(0, dtype=np.int64)
    turns = np.flatnonzero(np.diff(np.sign(np.diff(level))) != 0) + 1
    kept = np.concatenate([[0], turns, [len(level) - 1]])
    kept = _without_small_swings(level, kept, band)
    return np.asarray(place[kept[1:-1]], dtype=np.int64)


def _without_small_swings(
    level: NDArray[np.float64], kept: NDArray[np.int64], band: float
) -> NDArray[np.int64]:
    """Drop swings below the band; the first and last extreme stay as ends."""
    while len(kept) > 3:
        swing = np.abs(np.diff(level[kept]))
        padded = np.concatenate([[np.inf], swing, [np.inf]])
        small = (swing < band) & (swing <= padded[:-2]) & (swing < padded[2:])
        # the swings at the ends go with one extreme only, below
        small[0] = small[-1] = False
        small[1:] &= ~small[:-1]  # never two neighbours in one round
        if not small.any():
            break
        gone = np.zeros(len(kept), dtype=bool)
        where = np.flatnonzero(small)
        gone[where] = gone[where + 1] = True
        kept = kept[~gone]
    return _ends(level, kept, band)


def _ends(level: NDArray[np.float64], kept: NDArray[np.int64], band: float) -> NDArray[np.int64]:
    """Drop small swings next to an end: that end, not the swing, is where the record came from."""
    while len(kept) > 3 and abs(level[kept[2]] - level[kept[1]]) < band:
        kept = np.delete(kept, 1)
    while len(kept) > 3 and abs(level[kept[-2]] - level[kept[-3]]) < band:
        kept = np.delete(kept, -2)
    if len(kept) == 3 and np.abs(np.diff(level[kept])).max() < band:
        kept = kept[[0, -1]]
    return kept
