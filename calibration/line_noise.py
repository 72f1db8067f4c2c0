"""Line noise: the spectral density beside each line, from what the fit leaves over.

The residual block phasors are looked at in frequency bins of 1/T on both sides of each line. Bins that
another line or an unnamed tone sits in are left out.
"""

from dataclasses import dataclass
from functools import lru_cache
from itertools import pairwise

import numpy as np
from numpy.typing import NDArray

from calibration.phasors import BlockPhasors

__all__ = ["UNSTEADY", "LineNoise", "measure_noise", "noise_bins"]

_MOST_BINS = 32
_LEAST_BINS = 6
# What lies a block rate away comes back at a bin with the square of the bin's distance from the line
# in block rates: at most 0.25 % of its power.
_REACH = 0.05
# One exponential deviate in 64 exceeds 13 times the mean with probability 64·e^−13 = 1.4e-4.
_TONE = 13.0
_RINGS = (8, 12, 16, 20, 24, 28, 32)
_LEVEL = 3.0  # standard deviations: by chance twice in a thousand rings
UNSTEADY = 6.0  # 8 degrees of freedom beside 100: exceeded once in 100 000 records
"""``LineNoise.near`` from which on a line is not steady."""


@dataclass(frozen=True, slots=True)
class LineNoise:
    """The noise beside one line.

    Parameters
    ----------
    variance : float
        Variance of a sample if the whole spectrum were as beside the line, S·rate/2.
    dof : float
        Degrees of freedom of ``variance``.
    near : float
        Mean power of the two bins on each side, over that of the others.
    in_reach : ndarray of bool, shape (n_bins,)
        Bins that were compared.
    offsets : ndarray of int, shape (n_bins,)
        Bins looked at, in units of 1/T from the line.
    used : ndarray of bool, shape (n_bins,)
        Those that count.
    tones : int
        How many were left out for a tone in them.
    bins : ndarray of complex, shape (n_bins,)
        Residual in each bin, scaled so that its mean square is the variance of a sample.
    """

    variance: float
    dof: float
    near: float
    in_reach: NDArray[np.bool_]
    offsets: NDArray[np.int64]
    used: NDArray[np.bool_]
    tones: int
    bins: NDArray[np.complex128]


def noise_bins(
    phasors: BlockPhasors,
    residual: NDArray[np.complex128],
    lines: int,
) -> tuple[NDArray[np.int64], NDArray[np.complex128]]:
    """Return the residual in bins beside each line.

    Parameters
    ----------
    phasors : BlockPhasors
        The recording.
    residual : ndarray of complex, shape (n_blocks, n_carriers)
        Residual block phasors, the line's own phase course taken out.
    lines : int
        How many of the carriers, from the first, are lines.

    Returns
    -------
    offsets : ndarray of int, shape (n_bins,)
        In units of 1/T, T the span of the recording.
    bins : ndarray of complex, shape (n_bins, lines)
        Scaled so that white noise of variance σ² has mean square σ².
    """
    span = float(phasors.middles[-1] - phasors.middles[0] + phasors.block)
    middles, sums = _grouped(phasors.middles, residual[:, :lines])
    most = int(min(_MOST_BINS, max(1, 0.45 * span / phasors.block - 1)))
    offsets = np.concatenate([np.arange(-most, 0), np.arange(1, most + 1)])
    turns = _turns(most, ((middles - middles[0]) / span).tobytes())
    return offsets, turns @ sums / np.sqrt(phasors.used)


@lru_cache(maxsize=4)
def _turns(most: int, places: bytes) -> NDArray[np.complex128]:
    """Return e^(−2πi·j·x) for j = −most..−1, 1..most, shape (2·most, n_places)."""
    first = np.exp(-2j * np.pi * np.frombuffer(places))
    powers = np.cumprod(np.tile(first, (most, 1)), axis=0)
    return np.concatenate([np.conj(powers[::-1]), powers])


def _grouped(
    middles: NDArray[np.float64], residual: NDArray[np.complex128]
) -> tuple[NDArray[np.float64], NDArray[np.complex128]]:
    """Add up neighbouring blocks: a 16th of a turn in the outermost bin costs 1 % of its power."""
    size = len(middles) // (16 * _MOST_BINS)
    if size < 2:
        return middles, residual
    edges = np.arange(0, len(middles), size)
    counts = np.diff(np.append(edges, len(middles)))
    return np.add.reduceat(middles, edges) / counts, np.add.reduceat(residual, edges)


def measure_noise(
    offsets: NDArray[np.int64],
    bins: NDArray[np.complex128],
    line: float,
    taken: NDArray[np.float64],
    share: NDArray[np.float64],
    highest: float,
    block_rate: float,
) -> LineNoise:
    """Return the noise beside one line.

    Parameters
    ----------
    offsets : ndarray of int, shape (n_bins,)
        From :func:`noise_bins`.
    bins : ndarray of complex, shape (n_bins,)
        The line's column.
    line : float
        The line in bins, f·T.
    taken : ndarray
        Everything else that was fitted, in bins: other lines, tones, drift at 0.
    share : ndarray, shape (n_bins,)
        Share of each bin that other parameters have taken.
    highest : float
        The Nyquist frequency in bins.
    block_rate : float
        The rate of the blocks in bins, their number in the recording.

    Returns
    -------
    LineNoise
        With the share of each bin that the fit has taken restored.
    """
    # A carrier at distance d bins takes sinc²(d) of a bin's power; what is left is compared.
    place = line + offsets
    left = 1.0 - share - (np.sinc(place[:, None] - taken[None, :]) ** 2).sum(axis=1)
    reach = 0.7 * min(line, highest - line)
    sound = (left > 0.5) & (np.abs(offsets) <= max(3.0, reach)) & (place > 0.5) & (place < highest)
    power = np.abs(bins) ** 2 / np.where(left > 0.5, left, 1.0)
    toneless = _without_tones(power, sound)
    near_enough = np.abs(offsets) <= max(_LEAST_BINS, _REACH * block_rate)
    used = _level_with_the_line(power, toneless & near_enough, offsets)
    counted = float(left[used].sum())
    variance = float((np.abs(bins[used]) ** 2).sum()) / counted if counted > 0 else 0.0
    dof, tones = max(2.0, 2.0 * counted), int(sound.sum() - toneless.sum())
    close = sound & (np.abs(offsets) <= 2)
    near = float(power[close].mean() / variance) if close.any() and variance > 0 else 1.0
    if near > UNSTEADY:
        # A line that is not steady is as uncertain as its own skirt, whatever lies further out.
        variance, dof = near * variance, 2.0 * float(close.sum())
    return LineNoise(variance, dof, near, sound, offsets, used, tones, bins)


def _without_tones(power: NDArray[np.float64], sound: NDArray[np.bool_]) -> NDArray[np.bool_]:
    used = sound.copy()
    for _ in range(8):
        if used.sum() < 8:
            return used
        # The median of exponential deviates is ln 2 of their mean and does not see the tones.
        level = float(np.median(power[used])) / np.log(2.0)
        kept = sound & (power <= _TONE * level)
        if (kept == used).all() or kept.sum() < 0.5 * sound.sum():
            return used
        used = kept
    return used


def _level_with_the_line(
    power: NDArray[np.float64], used: NDArray[np.bool_], offsets: NDArray[np.int64]
) -> NDArray[np.bool_]:
    """Leave out far bins that are not level with the near ones, on each side by itself.

    A resonance one block rate away comes back into the outer bins more than into the inner ones; a
    steep spectrum tells there as well.
    """
    kept = used & (np.abs(offsets) <= _RINGS[0])
    for side in (-1, 1):
        for inner, outer in pairwise(_RINGS):
            distance = side * offsets
            ring = used & (distance > inner) & (distance <= outer)
            if not ring.any() or not kept.any():
                continue
            level = float(power[kept].mean())
            ratio = float(power[ring].mean()) / level if level > 0 else 0.0
            scatter = np.sqrt(
                1.0 / ring.sum() + 1.0 / kept.sum()
            )  # of the logarithm, one deviation
            if ratio <= 0 or abs(np.log(ratio)) > _LEVEL * scatter:
                break
            kept |= ring
    return kept
