"""Where the interferometer rests on its fringe, and what the fringe is."""

from collections.abc import Callable
from dataclasses import dataclass
from math import acos, pi

import numpy as np
from numpy.typing import NDArray

from calibration.errors import CalibrationError
from calibration.scan import fit_scan
from calibration.smoother import noise_std
from metro.kernel.contrast import contrast as contrast_of

__all__ = ["Fringe", "FringeFinder", "Resting", "found_fringe", "resting"]

FloatArray = NDArray[np.float64]

_GOOD_RAD, _FAIR_RAD = 0.26, 0.79  # 15° and 45° from mid-fringe
_BEYOND = 1.05  # of half the span: farther out, the extremes have moved
_ABOVE_NOISE = 30.0  # standard deviations from low to high; noise alone reaches ten
_STILL = 0.8  # of the span known so far: less is a modulation on one slope
_FOUND_OVER_S, _FOUND_EVERY_S = 30.0, 5.0
_FOUND_RATE_HZ = 2000.0  # enough for a fringe passed by hand or by a slow scan; bounds the work


@dataclass(frozen=True, slots=True)
class Fringe:
    """The extremes of the fringe and where they come from.

    Parameters
    ----------
    low_v, high_v : float
        Extremes, high above low, in the photodiode channel's unit.
    origin : str
        Such as ``"calibration"``, ``"bench"`` or ``"widest seen"``.
    contrast : float or None
        (high − low)/(high + low − 2·dark); None without a dark.
    """

    low_v: float
    high_v: float
    origin: str
    contrast: float | None = None

    @classmethod
    def of(cls, low_v: float, high_v: float, origin: str, dark_v: float | None) -> "Fringe":
        """Return the fringe with its contrast, where the dark is known."""
        known = dark_v is not None and high_v + low_v > 2.0 * dark_v
        contrast = contrast_of(low_v, high_v, dark_v) if known and dark_v is not None else None
        return cls(low_v, high_v, origin, contrast)

    @property
    def middle_v(self) -> float:
        """Voltage at mid-fringe."""
        return 0.5 * (self.low_v + self.high_v)

    @property
    def swing_v(self) -> float:
        """Half of high − low."""
        return 0.5 * (self.high_v - self.low_v)

    def volts(self, phase_rad: FloatArray) -> FloatArray:
        """Return the fringe law at some phases, shape (n,)."""
        return np.asarray(self.middle_v + self.swing_v * np.cos(phase_rad))


@dataclass(frozen=True, slots=True)
class Resting:
    """Where the interferometer rests.

    Parameters
    ----------
    volts : float
        Mean of the last moments.
    phase_rad : float
        On the named slope: −π..0 on the rising one, 0..π on the falling one.
    off_rad : float
        From mid-fringe, positive towards the top.
    verdict : str
        ``"at mid-fringe"``, ``"off mid-fringe"``, ``"near an extreme"`` or ``"outside the fringe"``.
    """

    volts: float
    phase_rad: float
    off_rad: float
    verdict: str


def resting(volts: float, fringe: Fringe, slope: str) -> Resting:
    """Return where a voltage lies on the fringe.

    Parameters
    ----------
    volts : float
        Mean voltage; finite.
    fringe : Fringe
        The extremes.
    slope : str
        ``"rising"`` or ``"falling"``: one photodiode cannot tell, so it is said.

    Returns
    -------
    Resting
        The working point; at an extreme where the voltage lies beyond it.
    """
    cosine = (volts - fringe.middle_v) / fringe.swing_v
    size = acos(min(1.0, max(-1.0, cosine)))
    off = pi / 2 - size
    if abs(cosine) > _BEYOND:
        verdict = "outside the fringe"
    elif abs(off) <= _GOOD_RAD:
        verdict = "at mid-fringe"
    elif abs(off) <= _FAIR_RAD:
        verdict = "off mid-fringe"
    else:
        verdict = "near an extreme"
    return Resting(volts, -size if slope == "rising" else size, off, verdict)


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
