"""Half fringes: how long they are along a swept record, vibration left out.

A slow mirror that shakes a little turns the level at every swing of its vibration. How fast the fringes
go by is told by swings over most of the span alone.
"""

import numpy as np
from numpy.typing import NDArray

from calibration.envelope import running_median
from calibration.turning_points import turning_points

__all__ = ["half_fringe_samples", "slow_spots", "whole_swings"]

FloatArray = NDArray[np.float64]

# of cos φ, which spans 2: vibration of 0.45 rad stays below, 2.5 samples a fringe still show every one
_LEAST_SWING = 0.9


def whole_swings(level: FloatArray, turns: NDArray[np.int64], band: float) -> NDArray[np.int64]:
    """Return where a record turns after a swing over a good part of the fringe.

    Parameters
    ----------
    level : ndarray, shape (n,)
        cos φ.
    turns : ndarray of int, shape (k,)
        Where it turns by more than the band.
    band : float
        Of ``turns``, in cos φ.

    Returns
    -------
    ndarray of int
        Samples; ``turns`` itself where there are fewer than three such swings.
    """
    if band >= _LEAST_SWING:
        return turns
    swings = turning_points(level, _LEAST_SWING)
    return swings if len(swings) >= 3 else turns


def half_fringe_samples(
    swings: NDArray[np.int64], places: NDArray[np.int64], count: int
) -> FloatArray:
    """Return how many samples a half fringe has about some places of a record.

    Parameters
    ----------
    swings : ndarray of int, shape (k,)
        Where the record turns after a swing over most of the fringe.
    places : ndarray of int, shape (m,)
        Samples.
    count : int
        Samples of the record.

    Returns
    -------
    ndarray, shape (m,)
        A running median over several half fringes; ≥ 1; the whole record where too few are seen.
    """
    if len(swings) < 3:
        return np.full(len(places), float(max(count, 1)))
    legs = running_median(np.diff(swings).astype(float), 7)
    middles = 0.5 * (swings[1:] + swings[:-1])
    return np.asarray(np.maximum(np.interp(places, middles, legs), 1.0))


def slow_spots(turns: NDArray[np.int64], count: int, times: float = 3.0) -> NDArray[np.int64]:
    """Return the turns about which the fringes go by far more slowly than before and after.

    Parameters
    ----------
    turns : ndarray of int, shape (k,)
        Samples at which a record turns after a whole swing.
    count : int
        Samples of the record.
    times : float, optional
        How much longer than usual both half fringes there are together, against one.

    Returns
    -------
    ndarray of int
        Samples; the mirror may have turned there unseen.
    """
    legs = np.diff(np.concatenate([[0], turns, [count - 1]])).astype(float)
    if len(legs) < 9:
        return np.zeros(0, dtype=np.int64)
    return np.asarray(turns[legs[:-1] + legs[1:] > times * running_median(legs, 9)[:-1]])
