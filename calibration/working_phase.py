"""The working phase: where on the fringe a bench stands, block by block, beside a known fast motion."""

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

__all__ = ["WorkingPhases", "block_rms", "block_sums", "working_phases"]

FloatArray = NDArray[np.float64]

_SHOWN = 0.2  # size from which a block tells the phase at all


@dataclass(frozen=True)
class WorkingPhases:
    """Slow phase in blocks that overlap by half.

    Attributes
    ----------
    middle : ndarray, shape (k,)
        Middles of the blocks [samples].
    phase_rad : ndarray, shape (k,)
        Phase over the expected one [rad], unwrapped.
    size : ndarray, shape (k,)
        Size of (cos φ, sin φ) found; 1 where the extremes hold and nothing moves fast.
    length : int
        Samples in a block.
    """

    middle: FloatArray
    phase_rad: FloatArray
    size: FloatArray
    length: int

    def course(self, count: int) -> FloatArray:
        """Return the slow phase at each sample.

        Parameters
        ----------
        count : int
            Samples.

        Returns
        -------
        ndarray, shape (n,)
            Phase [rad]; straight on beyond the middles of the first and the last block.
        """
        middle, phase, half = self.middle, self.phase_rad, self.length // 2
        first, last = 2.0 * phase[0] - phase[1], 2.0 * phase[-1] - phase[-2]
        at = np.concatenate([[middle[0] - half], middle, [middle[-1] + half]])
        whole = np.concatenate([[first], phase, [last]])
        return np.asarray(np.interp(np.arange(count), at, whole))

    def lost(self, count: int, weakest: float) -> NDArray[np.bool_]:
        """Return the samples in whose blocks the fast motion shows too little.

        Parameters
        ----------
        count : int
            Samples.
        weakest : float
            Least size.

        Returns
        -------
        ndarray of bool, shape (n,)
            True where the phase is lost.
        """
        size = np.interp(np.arange(count), self.middle, np.minimum(self.size, 2.0))
        return np.asarray((size < weakest) | (size > 1.6))


def block_rms(values: FloatArray, length: int) -> FloatArray:
    """Return the rms about each sample, over blocks that overlap by half.

    Parameters
    ----------
    values : ndarray, shape (n,)
        Samples; NaN where missing; two half blocks and more.
    length : int
        Samples in a block, even.

    Returns
    -------
    ndarray, shape (n,)
        0 where a block holds no sample.
    """
    good = np.isfinite(values)
    square, count = block_sums(
        np.stack([np.where(good, values, 0.0) ** 2, good.astype(float)]), length
    )
    rms = np.sqrt(square / np.maximum(count, 1.0))
    return np.asarray(np.interp(np.arange(len(values)), _middles(len(values), length), rms))


def block_sums(parts: FloatArray, length: int) -> FloatArray:
    """Return the sums over blocks that overlap by half.

    Parameters
    ----------
    parts : ndarray, shape (..., n)
        Samples; cut to whole half blocks.
    length : int
        Samples in a block, even.

    Returns
    -------
    ndarray, shape (..., k)
        One sum a block.
    """
    half = length // 2
    starts = np.arange(0, parts.shape[-1] - half + 1, half)
    single = np.add.reduceat(parts[..., : starts[-1] + half], starts, axis=-1)
    return np.asarray(single[..., 1:] + single[..., :-1])


def _middles(count: int, length: int) -> FloatArray:
    half = length // 2
    blocks = (count // half) - 1
    return half * np.arange(1, blocks + 1, dtype=float) - 0.5


def working_phases(cosine: FloatArray, expected: FloatArray, length: int) -> WorkingPhases:
    """Return how far the phase is off an expected one, block by block.

    Parameters
    ----------
    cosine : ndarray, shape (n,)
        The record between −1 and 1; NaN where samples are missing; two half blocks and more.
    expected : ndarray, shape (n,)
        Expected phase, the fast motion included [rad].
    length : int
        Samples in a block, even.

    Returns
    -------
    WorkingPhases
        From least squares of cos(expected + δ) in each block: all harmonics of the motion serve.
        Of size 0 throughout where fewer than two blocks tell the phase.
    """
    good = np.isfinite(cosine)
    record = np.where(good, cosine, 0.0)
    one, two = np.where(good, np.cos(expected), 0.0), np.where(good, -np.sin(expected), 0.0)
    parts = np.stack([one * one, one * two, two * two, one * record, two * record])
    a, b, d, u, v = block_sums(parts, length)
    bottom = a * d - b * b
    usable = bottom > 1e-6 * np.maximum(a + d, 1e-12) ** 2
    safe = np.where(usable, bottom, 1.0)
    c = np.where(usable, (d * u - b * v) / safe, 0.0)
    s = np.where(usable, (a * v - b * u) / safe, 0.0)
    middle = _middles(len(cosine), length)
    size = np.hypot(c, s)
    kept = size > _SHOWN
    if np.count_nonzero(kept) < 2:
        return WorkingPhases(middle, np.zeros(len(middle)), np.zeros(len(middle)), length)
    phase = np.interp(middle, middle[kept], np.unwrap(np.arctan2(s[kept], c[kept])))
    return WorkingPhases(middle, phase, size, length)
