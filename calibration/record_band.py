"""The band that a record fills, and the record thinned to what that band needs.

Start values need no more samples and no more harmonics than the fringe itself has.
"""

import math

import numpy as np
from numpy.typing import NDArray

__all__ = ["highest_turn", "tapered_power", "thinned"]

FloatArray = NDArray[np.float64]

_BANDS = 256
_ABOVE_FLOOR = 6.0
_LEAST_SHARE = 1e-6  # of the strongest band's power
_ENOUGH = 4000  # samples that cost little
_WIDTH = 2.5  # samples per half period of the highest turn that are kept


def tapered_power(values: FloatArray, size: int | None = None) -> FloatArray:
    """Return the power spectrum of a record without its mean, under a Hann window.

    Parameters
    ----------
    values : ndarray, shape (n,)
        Any unit; NaN where samples are missing: the line between their neighbours stands for them.
    size : int, optional
        Samples transformed, with zeros behind the record; n by default.

    Returns
    -------
    ndarray, shape (size // 2 + 1,)
        Unit² times samples².
    """
    good = np.flatnonzero(np.isfinite(values))
    filled = np.interp(np.arange(len(values)), good, values[good])
    return np.asarray(
        np.abs(np.fft.rfft((filled - filled.mean()) * np.hanning(len(filled)), size)) ** 2
    )


def highest_turn(values: FloatArray) -> float:
    """Return the highest frequency at which a record stands out of its noise.

    Parameters
    ----------
    values : ndarray, shape (n,)
        Any unit; NaN where samples are missing.

    Returns
    -------
    float
        Phase per sample [rad], at most π.
    """
    if np.count_nonzero(np.isfinite(values)) < 4 * _BANDS:
        return math.pi
    power = tapered_power(values)
    width = len(power) // _BANDS
    bands = power[: width * _BANDS].reshape(_BANDS, width).mean(axis=1)
    floor = float(np.quantile(bands, 0.2))
    out = np.flatnonzero(bands > max(_ABOVE_FLOOR * floor, _LEAST_SHARE * float(bands.max())))
    return math.pi * (int(out[-1]) + 1) / _BANDS if len(out) else math.pi


def thinned(values: FloatArray, turn: float) -> tuple[FloatArray, int]:
    """Return means over so many neighbours that the highest frequency is kept, and how many.

    Parameters
    ----------
    values : ndarray, shape (n,)
        Any unit; NaN where samples are missing.
    turn : float
        Highest frequency, as phase per sample [rad].

    Returns
    -------
    tuple of (ndarray, int)
        One value for so many samples, what is over at the end left out; 1 where there are few.
    """
    many = min(int(math.pi / (_WIDTH * turn)), len(values) // _ENOUGH)
    if many < 2:
        return values, 1
    groups = values[: len(values) // many * many].reshape(-1, many)
    there = np.isfinite(groups)
    count = there.sum(axis=1)
    sums = np.where(there, groups, 0.0).sum(axis=1)
    return np.where(count > 0, sums / np.maximum(count, 1), np.nan), many
