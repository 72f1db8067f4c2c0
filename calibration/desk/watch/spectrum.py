"""The running amplitude spectral density: overlapping segments, averaged as they come in."""

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from calibration.welch import WelchSum

__all__ = ["RunningSpectrum", "SpectrumView"]

FloatArray = NDArray[np.float64]

_RESOLUTION_HZ = 1.0  # between neighbouring frequencies, where the rate allows it
_SHORTEST, _LONGEST = 64, 1 << 17  # samples of a segment; 1 MB of float64 at most
_AVERAGES = 16  # then older segments fade out: eight seconds at 1 Hz


@dataclass(frozen=True, eq=False, slots=True)
class SpectrumView:
    """A one-sided amplitude spectral density in bins that widen with frequency.

    Parameters
    ----------
    frequency_hz : ndarray, shape (n,)
        Middle of each bin [Hz].
    density : ndarray, shape (n,)
        Root of the mean power density in each bin [unit/√Hz].
    highest : ndarray, shape (n,)
        Root of the highest power density in each bin [unit/√Hz]: a line stands out in it.
    averages : float
        Segments that the average is worth.
    left_out : int
        Segments left out since the start because samples in them were missing or over-range.
    noise_bandwidth_hz : float
        Equivalent noise bandwidth of the window [Hz].
    """

    frequency_hz: FloatArray
    density: FloatArray
    highest: FloatArray
    averages: float
    left_out: int
    noise_bandwidth_hz: float


class RunningSpectrum:
    """Welch's average over Hann segments that overlap by half, the mean of each taken off.

    Parameters
    ----------
    rate_hz : float
        Samples per second; > 0.
    bins : int
        At most as many bins in the view.

    References
    ----------
    P. D. Welch, IEEE Trans. Audio Electroacoust. 15 (1967) 70.
    """

    def __init__(self, rate_hz: float, bins: int = 500) -> None:
        wanted = min(max(rate_hz / _RESOLUTION_HZ, _SHORTEST), _LONGEST)
        self.length = 1 << int(np.ceil(np.log2(wanted)))
        self._rate_hz = rate_hz
        self.frequencies_hz: FloatArray = np.asarray(np.fft.rfftfreq(self.length, 1 / rate_hz))
        self._edges = _edges(self.frequencies_hz.size, bins)
        self._bandwidth_hz = 0.0
        self.clear()

    def clear(self) -> None:
        """Forget everything."""
        self._held = np.full(self.length, np.nan)
        self._filled = 0
        self._next = 0
        self._power = np.zeros(self.frequencies_hz.size)
        self._averages = 0
        self._left_out = 0

    def add(self, start_index: int, values: FloatArray) -> None:
        """Take the next samples.

        Parameters
        ----------
        start_index : int
            Index of the first one; where it does not follow on the last one a new segment begins.
        values : ndarray, shape (n,)
            NaN where missing or over-range.
        """
        if start_index != self._next and self._filled:
            self._left_out += 1
            self._filled = 0
        self._next = start_index + values.size
        while values.size:
            taken = min(values.size, self.length - self._filled)
            self._held[self._filled : self._filled + taken] = values[:taken]
            self._filled += taken
            values = values[taken:]
            if self._filled == self.length:
                self._average()
                half = self.length // 2
                self._held[:half] = self._held[half:]
                self._filled = half

    def _average(self) -> None:
        welch = WelchSum(self.length, self._rate_hz)
        welch.add(self._held)
        found = welch.result()
        if not found.segments:
            self._left_out += 1
            return
        self._averages = min(self._averages + 1, _AVERAGES)
        self._power += (found.power - self._power) / self._averages
        self._bandwidth_hz = found.noise_bandwidth_hz

    @property
    def shown_hz(self) -> FloatArray:
        """Middle of each bin of the view [Hz], shape (n,)."""
        return np.asarray(self._binned(np.add, self.frequencies_hz) / np.diff(self._edges))

    def _binned(self, how: np.ufunc, values: FloatArray) -> FloatArray:
        """Bring values at every frequency but 0 and half the rate into the bins of the view."""
        return np.asarray(how.reduceat(values[1:-1], self._edges[:-1]))

    def power_density(self) -> FloatArray:
        """Return the averaged power density at every frequency, shape (length/2 + 1,)."""
        return self._power.copy()

    def view(self) -> SpectrumView:
        """Return the spectrum as it is now, without frequency 0 and half the rate.

        Returns
        -------
        SpectrumView
            Empty arrays before the first whole segment.
        """
        if not self._averages:
            none = np.zeros(0)
            return SpectrumView(none, none, none, 0.0, self._left_out, self._bandwidth_hz)
        return SpectrumView(
            self.shown_hz,
            np.sqrt(self._binned(np.add, self._power) / np.diff(self._edges)),
            np.sqrt(self._binned(np.maximum, self._power)),
            float(self._averages),
            self._left_out,
            self._bandwidth_hz,
        )


def _edges(size: int, bins: int) -> NDArray[np.int64]:
    """Return the borders of bins of one frequency each at first, then of equal ratio."""
    top = size - 2  # without frequency 0 and half the rate
    wanted = np.unique(np.rint(np.geomspace(1, top + 1, bins)).astype(np.int64)) - 1
    return np.unique(np.concatenate([[0], wanted, [top]]))
