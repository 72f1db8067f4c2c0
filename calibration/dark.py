"""The dark level: the photodiode's voltage with the beam blocked."""

from collections.abc import Sequence
from math import sqrt

import numpy as np
from numpy.typing import NDArray

from metro.measured import Measured

__all__ = ["dark_level"]

BLOCKS = 16  # enough for a scatter, few enough that a block outlasts the mains and 1/f noise


def dark_level(records: Sequence[NDArray[np.float64]]) -> Measured | None:
    """Return the mean dark level of one or more records.

    Parameters
    ----------
    records : sequence of ndarray, shape (n,)
        Photodiode samples [V], NaN where missing.

    Returns
    -------
    Measured or None
        Mean [V] with the scatter of block means behind its u; None without a usable record.
    """
    means = [
        float(np.nanmean(block))
        for record in records
        for block in np.array_split(record, BLOCKS)
        if np.isfinite(block).any()
    ]
    if len(means) < 2:
        return None
    u = float(np.std(means, ddof=1)) / sqrt(len(means))
    return Measured.of(float(np.mean(means)), "V", u, len(means) - 1)
