"""Harmonic blocks: the harmonics of a driven line in short stretches of a record."""

import math
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

__all__ = ["HarmonicBlocks", "lay_blocks"]

_MOST_BLOCKS = 192  # of 40 periods; shorter ones may be more
_LONGEST = 16384


@dataclass(frozen=True)
class HarmonicBlocks:
    """Stretches of a record under a raised-cosine window.

    Attributes
    ----------
    values : ndarray, shape (n_blocks, length)
        Windowed samples; the window's mean is one.
    window_mean : ndarray, shape (n_blocks,)
        Mean of the record in each block.
    middle : ndarray, shape (n_blocks,)
        Sample index of each block's first sample plus half a block.
    """

    values: NDArray[np.float64]
    window_mean: NDArray[np.float64]
    middle: NDArray[np.float64]

    def harmonics(self, turn: float, centre: float, highest: int) -> NDArray[np.complex128]:
        """Return the harmonics of a line in every block.

        Parameters
        ----------
        turn : float
            The line's phase per sample [rad].
        centre : float
            Sample index at which phases count as zero.
        highest : int
            Highest harmonic.

        Returns
        -------
        ndarray, shape (n_blocks, highest)
            Complex amplitudes (zero to peak) of harmonics 1 … ``highest``.
        """
        length = self.values.shape[1]
        order = np.arange(1, highest + 1)
        offset = np.arange(length) - length / 2.0
        carriers = np.exp(-1j * turn * np.outer(offset, order))
        bare = self.values - self.window_mean[:, None] * _window(length)
        found = bare @ carriers * (2.0 / length)
        return np.asarray(found * np.exp(-1j * turn * np.outer(self.middle - centre, order)))


def _window(length: int) -> NDArray[np.float64]:
    return np.asarray(1.0 - np.cos(2.0 * np.pi * np.arange(length) / length))


def lay_blocks(
    values: NDArray[np.float64], shortest: float, period: float, periods: float = 40.0
) -> HarmonicBlocks:
    """Cut a record into overlapping blocks.

    Parameters
    ----------
    values : ndarray, shape (n,)
        Record; NaN where samples are missing.
    shortest : float
        Least length of a block [samples], enough to tell the lines apart.
    period : float
        Period of the lowest line [samples]; a block holds a whole number of them, nearly.
    periods : float, optional
        Most periods in a block, where ``shortest`` allows.

    Returns
    -------
    HarmonicBlocks
        Blocks that lack less than a tenth of their samples; missing ones count as the block's mean.
    """
    n = len(values)
    length = max(shortest, min(n / 12.0, periods * period, float(_LONGEST)))
    length = min(max(round(length / period), 1) * period, float(n))
    size = max(math.floor(length + 0.5), 1)
    count = min(max(2 * (n // size) - 1, 1), round(_MOST_BLOCKS * max(40.0 / periods, 1.0)))
    starts = np.unique(np.round(np.linspace(0, n - size, count)).astype(np.int64))
    pieces = np.stack([values[s : s + size] for s in starts.tolist()])
    good = np.isfinite(pieces)
    kept = good.mean(axis=1) > 0.9
    if not kept.any():
        kept = good.any(axis=1)
    pieces, good, starts = pieces[kept], good[kept], starts[kept]
    window = _window(size)
    filled = np.where(good, pieces, 0.0)
    mean = (filled @ window) / np.maximum(good @ window, 1e-12)
    filled = np.where(good, pieces, mean[:, None])
    return HarmonicBlocks(filled * window, mean, starts + size / 2.0)
