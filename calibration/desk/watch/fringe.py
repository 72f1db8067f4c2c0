"""Where the interferometer rests on its fringe, and what the fringe is."""

from dataclasses import dataclass
from math import acos, pi

import numpy as np
from numpy.typing import NDArray

from metro.kernel.contrast import contrast as contrast_of

__all__ = ["Fringe", "Resting", "resting"]

FloatArray = NDArray[np.float64]

_GOOD_RAD, _FAIR_RAD = 0.26, 0.79  # 15° and 45° from mid-fringe
_BEYOND = 1.05  # of half the span: farther out, the extremes have moved


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
