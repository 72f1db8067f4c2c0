"""The fringe found while it is passed: the widest stretch between two extremes that was seen."""

from collections.abc import Callable

import numpy as np
from numpy.typing import NDArray

from calibration.desk.watch.fringe import Fringe
from calibration.errors import CalibrationError
from calibration.scan import fit_scan
from calibration.smoother import noise_std

__all__ = ["FringeFinder", "found_fringe"]

FloatArray = NDArray[np.float64]

_ABOVE_NOISE = 30.0  # standard deviations from low to high; noise alone reaches ten
_STILL = 0.8  # of the span known so far: less is a modulation on one slope
_FOUND_OVER_S, _FOUND_EVERY_S = 30.0, 5.0
_FOUND_RATE_HZ = 2000.0  # enough for a fringe passed by hand or by a slow scan; bounds the work


def found_fringe(
    values: FloatArray, rate_hz: float, dark_v: float | None, least_v: float = 0.0
) -> Fringe | None:
    """Return the fringe that a stretch passed over, None where it did not.

    A sine on one slope has the same extremes as a low fringe that is passed evenly: nothing in the
    samples tells them apart, so that only the widest that was seen may be taken for the fringe.

    Parameters
    ----------
    values : ndarray, shape (n,)
        Photodiode, NaN where missing.
    rate_hz : float
        Of these values.
    dark_v : float or None
        Voltage without light, where known.
    least_v : float
        high − low that is already known of; less is not looked at.

    Returns
    -------
    Fringe or None
        Only extremes that a scan of this stretch would be trusted with, well above the noise.
    """
    good = values[np.isfinite(values)]
    if not good.size or np.ptp(good) < max(least_v, _ABOVE_NOISE * noise_std(values)):
        return None
    try:
        scan = fit_scan(values, rate_hz)
    except CalibrationError:
        return None
    if not scan.is_trustworthy or not scan.high - scan.low >= max(least_v, 1e-300):
        return None
    return Fringe.of(scan.low, scan.high, "widest seen", dark_v)


class FringeFinder:
    """Keep every so-many-th sample of the last half minute, and say when to look for the fringe.

    Parameters
    ----------
    rate_hz : float
        Samples per second.
    """

    def __init__(self, rate_hz: float) -> None:
        self._step = max(1, int(rate_hz / _FOUND_RATE_HZ))
        self.rate_hz = rate_hz / self._step
        self._kept = np.full(max(64, round(_FOUND_OVER_S * self.rate_hz)), np.nan)
        self._every = max(32, round(_FOUND_EVERY_S * self.rate_hz))
        self._newest = -1  # number of the newest kept sample
        self._looked = 0

    def add(
        self, start_index: int, values: FloatArray, known: Fringe | None = None
    ) -> Callable[[float | None], Fringe | None] | None:
        """Take the next samples; return a look for the fringe where one is due.

        Parameters
        ----------
        start_index : int
            Index of the first one.
        values : ndarray, shape (n,)
            Photodiode, NaN where missing or over-range.
        known : Fringe or None
            The fringe as far as it is known: a much smaller span is not taken for one.

        Returns
        -------
        callable or None
            Takes the dark voltage and returns what `found_fringe` does; it may run elsewhere.
        """
        kept = values[-start_index % self._step :: self._step]
        if not kept.size:
            return None
        size = self._kept.size
        first = (start_index + self._step - 1) // self._step
        if first <= self._newest:  # the indices began anew
            self._kept[:] = np.nan
            self._newest = first - 1
            self._looked = first
        missing = np.arange(max(self._newest, first - size) + 1, first) % size
        self._kept[missing] = np.nan
        places = (first + np.arange(kept.size)) % size
        self._kept[places] = kept
        self._newest = first + kept.size - 1
        if self._newest - self._looked < self._every:
            return None
        self._looked = self._newest
        stretch = np.roll(self._kept, -((self._newest + 1) % size))
        least_v = 0.0 if known is None else _STILL * 2.0 * known.swing_v
        return lambda dark_v: found_fringe(stretch, self.rate_hz, dark_v, least_v)
