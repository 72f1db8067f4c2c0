"""The smoother: averaging a photodiode record over time without bending its fringes.

A fringe passes far more slowly than a record is sampled, so averaging a few samples lowers the noise
for nothing. How many is read off the record's own spectrum: the part of the signal that the average
would take away must stay well below the noise that it leaves.
"""

import math

import numpy as np
from numpy.typing import NDArray

__all__ = ["floor_std", "noise_gain", "noise_std", "smooth", "smoothing_length"]

_LENGTHS = (65, 49, 37, 27, 21, 17, 13, 9, 7, 5)
_LOSS = 0.15  # allowed rms of the signal taken away, as a fraction of the noise left
_SEGMENT = 2048


def _kernel(length: int) -> NDArray[np.float64]:
    """Return the weights of a local parabola's middle value (Savitzky & Golay 1964)."""
    if length < 5:
        return np.ones(1)
    k = np.arange(length) - length // 2
    basis = np.stack([np.ones(length), k * k.astype(float)], axis=1)
    return np.asarray(np.linalg.solve(basis.T @ basis, basis.T)[0])


def smooth(values: NDArray[np.float64], length: int) -> NDArray[np.float64]:
    """Return the record averaged by local parabolas.

    Parameters
    ----------
    values : ndarray, shape (n,)
        Record, any unit; NaN where samples are missing.
    length : int
        Samples in one parabola, odd; below 5 nothing is averaged.

    Returns
    -------
    ndarray, shape (n,)
        Averaged record, NaN within half a length of an end or of a missing sample.

    References
    ----------
    A. Savitzky, M. J. E. Golay, Anal. Chem. 36 (1964) 1627.
    """
    weights = _kernel(length)
    if len(weights) == 1:
        return values
    out = np.full(len(values), np.nan)
    half = length // 2
    if len(values) >= length:
        out[half : len(values) - half] = np.convolve(values, weights, "valid")
    return out


def noise_gain(length: int) -> float:
    """Return the variance of averaged white noise relative to its variance before.

    Parameters
    ----------
    length : int
        Samples in one parabola.

    Returns
    -------
    float
        Σw², 1 for no averaging; its inverse is about the number of samples that move together.
    """
    return float(np.sum(_kernel(length) ** 2))


def noise_std(values: NDArray[np.float64]) -> float:
    """Return the standard deviation of a record's sample-to-sample noise.

    Parameters
    ----------
    values : ndarray, shape (n,)
        Record with a signal slow against the sampling; NaN where samples are missing.

    Returns
    -------
    float
        Standard deviation from the small ones among the third differences, whose white-noise variance
        is 20 σ²: where the signal is sampled coarsely, only they are free of it.
    """
    third = np.abs(np.diff(values, 3))
    third = third[np.isfinite(third)]
    # 0.31864 is the lower quartile of the absolute value of a normal variable
    return float(np.quantile(third, 0.25) / 0.31864 / math.sqrt(20)) if len(third) else 0.0


def floor_std(values: NDArray[np.float64]) -> float:
    """Return the standard deviation of white noise as strong as the spectrum's floor.

    Parameters
    ----------
    values : ndarray, shape (n,)
        Record whose signal leaves half of the spectrum free, however fast; NaN where samples are
        missing.

    Returns
    -------
    float
        From the lower half of the averaged periodogram; 0 with fewer than 256 samples.
    """
    if np.count_nonzero(np.isfinite(values)) < 256:
        return 0.0
    return math.sqrt(_floor(_spectrum(values)))


def _floor(power: NDArray[np.float64]) -> float:
    """Return the variance of white noise as strong as a periodogram's floor."""
    return float(np.median(np.sort(power)[: max(len(power) // 2, 1)])) * 1.2 * len(power)


def _spectrum(values: NDArray[np.float64]) -> NDArray[np.float64]:
    """Return the averaged periodogram (Hann, half overlap), its sum the record's variance."""
    good = np.isfinite(values)
    filled = np.interp(np.arange(len(values)), np.flatnonzero(good), values[good])
    size = min(_SEGMENT, len(filled))
    window = np.hanning(size + 1)[:-1]
    pieces = np.lib.stride_tricks.sliding_window_view(filled, size)[:: max(size // 2, 1)]
    power = np.mean(np.abs(np.fft.rfft((pieces - filled.mean()) * window, axis=1)) ** 2, axis=0)
    return np.asarray(2.0 * power / (size * np.sum(window**2)))


def smoothing_length(values: NDArray[np.float64]) -> int:
    """Return the longest average that leaves the fringes as they are.

    Parameters
    ----------
    values : ndarray, shape (n,)
        Record, any unit; NaN where samples are missing.

    Returns
    -------
    int
        Samples in one parabola, odd; 1 where no averaging is harmless.

    Notes
    -----
    The signal is what stands above the floor of the averaged periodogram (its lowest quarter's
    median); lost is Σ P(f)·(1 − H(f))², with H the smoother's response.
    """
    if np.count_nonzero(np.isfinite(values)) < 256:
        return 1
    power = _spectrum(values)
    variance = _floor(power)
    floor = variance / len(power)
    signal = np.where(power > 2.0 * floor, power, 0.0)
    turn = np.arange(len(power)) * np.pi / max(len(power) - 1, 1)  # rad per sample
    for length in _LENGTHS:
        k = np.arange(length) - length // 2
        lost = float(np.sum(signal * (1.0 - np.cos(np.outer(turn, k)) @ _kernel(length)) ** 2))
        if lost <= _LOSS**2 * variance * noise_gain(length):
            return length
    return 1
