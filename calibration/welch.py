"""Welch: the power spectral density of samples that come in pieces, gaps left out.

Segments that overlap by half lose their mean, are windowed after Hann and transformed; their powers are
averaged. A segment holds no missing sample: after each gap segments begin anew.
"""

import os
from collections.abc import Iterator
from concurrent.futures import ThreadPoolExecutor
from dataclasses import dataclass
from itertools import pairwise

import numpy as np
from numpy.typing import NDArray

__all__ = ["OVERLAP", "WINDOW", "WelchDensity", "WelchSum", "hann"]

WINDOW = "hann"
OVERLAP = 0.5

_BATCH_SAMPLES = 1 << 15  # 256 kB of float64, windowed and transformed within the cache
_SHARED = (1.0 / 6.0) ** 2  # of the powers of two segments that overlap by half: (Σ w·w' / Σ w²)²
_THREADS = min(2, os.cpu_count() or 1)

FloatArray = NDArray[np.float64]


def hann(samples: int) -> FloatArray:
    """Return the periodic window after Hann, sin²(πn/N), shape (samples,)."""
    return np.asarray(np.sin(np.pi * np.arange(samples) / samples) ** 2)


@dataclass(frozen=True, eq=False, slots=True)
class WelchDensity:
    """A one-sided spectral density.

    Parameters
    ----------
    frequency_hz : ndarray, shape (n_bins,)
        From 0 to half the rate [Hz].
    power : ndarray, shape (n_bins,)
        Power spectral density, unit²/Hz.
    segments : int
        Segments averaged.
    averages : float
        Independent segments that they are worth; the relative u of ``power`` is 1/√averages.
    noise_bandwidth_hz : float
        Equivalent noise bandwidth of the window [Hz].
    used, samples : int
        Samples that lie in a segment, and all that there were, missing ones included.
    """

    frequency_hz: FloatArray
    power: FloatArray
    segments: int
    averages: float
    noise_bandwidth_hz: float
    used: int
    samples: int

    @property
    def density(self) -> FloatArray:
        """Amplitude spectral density, unit/√Hz, shape (n_bins,)."""
        return np.asarray(np.sqrt(self.power))

    @property
    def density_u(self) -> FloatArray:
        """Its standard uncertainty for noise that is steady: half of the power's, relatively."""
        return self.density * (0.5 / np.sqrt(self.averages)) if self.averages else self.density


class WelchSum:
    """The sum over segments, fed piece by piece.

    Parameters
    ----------
    segment : int
        Samples in a segment, even.
    rate_hz : float
        Sampling rate [Hz].

    Notes
    -----
    Two Hann-windowed segments that overlap by half share 1/36 of the variance of their powers, so K
    of them in a row are worth K/(1 + 2·(1 − 1/K)/36).

    References
    ----------
    Welch, IEEE Trans. Audio Electroacoust. 15 (1967) 70; cited from memory, checked against scipy.
    """

    def __init__(self, segment: int, rate_hz: float) -> None:
        self.segment, self.rate_hz = segment, rate_hz
        self._window = hann(segment)
        self._step = segment // 2
        self._powers = np.zeros((_THREADS, segment // 2 + 1))
        self._carry: FloatArray = np.empty(0)
        self._begun = False  # whether the samples carried over lie in a segment already
        self._segments = self._pairs = self._used = self._samples = 0

    def add(self, values: FloatArray) -> None:
        """Take the samples that follow those before.

        Parameters
        ----------
        values : ndarray, shape (n,)
            NaN where missing.
        """
        self._samples += len(values)
        with np.errstate(invalid="ignore", over="ignore"):
            is_whole = bool(np.isfinite(values.sum()))
        if is_whole or np.isfinite(values).all():
            self._extend(values)
            return
        for is_good, run in _runs(values):
            if is_good:
                self._extend(run)
            else:
                self._carry, self._begun = np.empty(0), False

    def _extend(self, run: FloatArray) -> None:
        """Sum the segments that what was carried over and a run without gaps hold together."""
        size, step = self.segment, self._step
        # The seam is a short piece of its own, so that the run itself is never copied.
        while len(self._carry) and len(run):
            joined = np.concatenate([self._carry, run[: size - len(self._carry)]])
            if len(joined) < size:
                self._carry = joined
                return
            self._sum(joined)
            # What the next segment still needs from before the run.
            left = len(self._carry) - step
            self._carry, run = (
                (joined[step:][:left], run) if left > 0 else (np.empty(0), run[-left:])
            )
        count = (len(run) - size) // step + 1 if len(run) >= size else 0
        if count:
            self._sum(run[: (count - 1) * step + size])
        self._carry = np.array(run[count * step :])

    def _sum(self, run: FloatArray) -> None:
        segments = np.lib.stride_tricks.sliding_window_view(run, self.segment)[:: self._step]
        count = len(segments)
        self._segments += count
        self._pairs += count - 1 + self._begun
        self._used += len(run) - (self.segment - self._step if self._begun else 0)
        self._begun = True
        if count < 2 * _THREADS:
            self._sum_rows(0, segments)
            return
        shares = np.array_split(segments, _THREADS)
        with ThreadPoolExecutor(_THREADS) as threads:
            list(threads.map(self._sum_rows, range(_THREADS), shares))

    def _sum_rows(self, thread: int, segments: FloatArray) -> None:
        rows = max(1, _BATCH_SAMPLES // self.segment)
        buffer = np.empty((min(rows, len(segments)), self.segment))
        for first in range(0, len(segments), rows):
            part = segments[first : first + rows]
            windowed = buffer[: len(part)]
            np.subtract(part, part.mean(axis=1, keepdims=True), out=windowed)
            windowed *= self._window
            parts = np.fft.rfft(windowed, axis=1).view(np.float64)
            squares = np.einsum("ij,ij->j", parts, parts)
            self._powers[thread] += squares[::2] + squares[1::2]

    def result(self) -> WelchDensity:
        """Return the density of what was fed so far."""
        power: FloatArray = self._powers.sum(axis=0)
        squares, total = float((self._window**2).sum()), float(self._window.sum())
        power *= 2.0 / (self.rate_hz * squares * max(1, self._segments))
        power[0] *= 0.5  # 0 and half the rate have no mirror image
        power[-1] *= 0.5
        shared = 2.0 * _SHARED * self._pairs / max(1, self._segments)
        return WelchDensity(
            np.asarray(np.arange(len(power)) * (self.rate_hz / self.segment), dtype=np.float64),
            power,
            self._segments,
            self._segments / (1.0 + shared),
            self.rate_hz * squares / total**2,
            self._used,
            self._samples,
        )


def _runs(values: FloatArray) -> Iterator[tuple[bool, FloatArray]]:
    good = np.isfinite(values)
    edges = [0, *(1 + np.flatnonzero(np.diff(good))).tolist(), len(values)]
    for begin, end in pairwise(edges):
        yield bool(good[begin]), values[begin:end]
