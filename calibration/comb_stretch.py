"""How far the comb of a driven fringe lies beside the frequencies given.

A generator set to a slightly other frequency, or a board on an RC clock, moves all harmonics and mixed
tones of the lines by the same share. The share at which most of the record's power is met is it.
"""

import itertools
import math

import numpy as np
from numpy.typing import NDArray

from calibration.record_band import tapered_power

__all__ = ["likely_stretches"]

FloatArray = NDArray[np.float64]

_MOST = 0.012
_ORDER = 3  # of harmonics and mixed tones
_STEP = 0.2  # of a resolved bin, at the highest tone
_MOST_STEPS = 60_000
_CLEAR = 1.02  # times the power met without any stretch


def likely_stretches(values: FloatArray, turns: FloatArray) -> list[float]:
    """Return by what share all tones may lie off, likeliest first.

    Parameters
    ----------
    values : ndarray, shape (n,)
        Record; NaN where samples are missing.
    turns : ndarray, shape (n_lines,)
        Phase of each line per sample [rad].

    Returns
    -------
    list of float
        At most three relative shifts within ±1.2 %; empty where none meets clearly more power.
    """
    size = 1 << math.ceil(math.log2(4 * len(values)))
    power = tapered_power(values, size)
    tones = _tones(turns)
    reach = int(_MOST * float(tones.max()) * len(values) / (2.0 * np.pi) / _STEP)
    shares = np.linspace(-_MOST, _MOST, 2 * min(max(reach, 8), _MOST_STEPS // 2) + 1)
    met = np.zeros(len(shares))
    for tone in tones.tolist():
        places = np.rint(tone * (1.0 + shares) * size / (2.0 * np.pi)).astype(np.int64)
        met += power[np.minimum(places, len(power) - 1)]
    peaks = np.flatnonzero((met[1:-1] >= met[:-2]) & (met[1:-1] > met[2:])) + 1
    peaks = peaks[met[peaks] > _CLEAR * met[len(shares) // 2]]
    return [float(shares[k]) for k in peaks[np.argsort(-met[peaks])][:3]]


def _tones(turns: FloatArray) -> FloatArray:
    """Return harmonics and mixed tones of low order below half the rate, as phase per sample."""
    orders = itertools.product(range(-_ORDER, _ORDER + 1), repeat=min(len(turns), 3))
    mixed = [
        np.dot(order, turns[: len(order)]) for order in orders if sum(map(abs, order)) <= _ORDER
    ]
    found = np.unique(np.abs(np.round([*mixed, *turns[3:]], 12)))
    return found[(found > 0.3 * float(turns.min())) & (found < 0.98 * np.pi)]
