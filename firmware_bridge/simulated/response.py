"""One-pole responses of the simulated readout as a short filter on its samples.

The filter's taps are fitted by least squares to 1/(1 + if/f0); below
a quarter of the rate it keeps to the poles within a few parts in 1e5, which a test checks.
"""

from collections.abc import Sequence
from functools import lru_cache
from math import ceil, pi, prod

import numpy as np
from numpy.typing import NDArray

from metro.kernel.photodiode import one_pole_response

__all__ = ["AHEAD", "pole_gain", "taps_for_poles"]

FloatArray = NDArray[np.float64]

AHEAD = 24  # taps that look forward: they let the fit follow the pole's phase up to the edge
_SHORTEST = 40  # taps that look back, at least
_DECAY = 16.0  # a pole's memory is followed down to exp(-16) = 1e-7


def pole_gain(frequency_hz: float, corners_hz: Sequence[float]) -> complex:
    """Return the product of one-pole gains 1/(1 + if/f0) at one frequency (dimensionless)."""
    return prod(
        (one_pole_response(frequency_hz, corner) for corner in corners_hz), start=1.0 + 0.0j
    )


@lru_cache(maxsize=16)  # every recording of a session has the same
def taps_for_poles(corners_hz: tuple[float, ...], rate_hz: float) -> FloatArray:
    """Return filter taps for a product of poles, shape (n_taps,).

    Tap ``j`` multiplies the sample ``j - AHEAD`` steps back. The gain at zero frequency is one.
    """
    memory = max((_DECAY * rate_hz / (2 * pi * corner_hz) for corner_hz in corners_hz), default=0.0)
    behind = max(_SHORTEST, ceil(memory))
    steps = np.arange(-AHEAD, behind + 1)
    if not corners_hz:
        return np.asarray(steps == 0, dtype=np.float64)
    turns = np.linspace(0.0, 0.5, 6 * steps.size)
    target = np.prod([1.0 / (1.0 + 1j * turns * rate_hz / corner) for corner in corners_hz], axis=0)
    waves = np.exp(-2j * np.pi * np.outer(turns, steps))
    weight = np.select([turns < 0.25, turns < 0.45], [30.0, 1.0], 0.05)  # keeps the edge tame
    rows = np.vstack([(weight[:, None] * waves).real, (weight[:, None] * waves).imag])
    wanted = weight * target
    taps = np.linalg.lstsq(rows, np.concatenate([wanted.real, wanted.imag]), rcond=None)[0]
    return np.asarray(taps / taps.sum(), dtype=np.float64)
