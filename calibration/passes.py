"""Passes: the stretches of a scan between one middle of the fringe and the next.

Each time the photodiode goes over a fringe top or bottom is one pass: an independent look at that
extreme, at its own time.
"""

import numpy as np
from numpy.typing import NDArray

__all__ = ["number_passes"]


def number_passes(values: NDArray[np.float64], low: float, high: float) -> NDArray[np.int64]:
    """Return the number of the pass over an extreme that each sample belongs to.

    Parameters
    ----------
    values : ndarray, shape (n,)
        Record, any unit, no NaN.
    low, high : float
        Rough extremes, same unit. A new pass begins when the record has crossed from the lower
        30 % to the upper 30 % of the span or back, so that noise at mid-fringe starts none.

    Returns
    -------
    ndarray of int, shape (n,)
        Number of the pass that each sample belongs to, from 0.
    """
    span = high - low
    side = np.where(values > high - 0.3 * span, 1, np.where(values < low + 0.3 * span, -1, 0))
    seen = np.flatnonzero(side)
    if not len(seen):
        return np.zeros(len(values), dtype=np.int64)
    last = np.maximum.accumulate(np.where(side != 0, np.arange(len(values)), seen[0]))
    turned = np.diff(side[last]) != 0
    return np.concatenate([[0], np.cumsum(turned)]).astype(np.int64)
