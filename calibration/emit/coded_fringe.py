"""The fringe as the board sees it: extremes in converter codes, and metres per radian."""

from dataclasses import dataclass, field
from functools import cached_property
from math import ceil, floor

import numpy as np
from numpy.typing import NDArray

from calibration.errors import CalibrationError
from calibration.extremes import Extremes
from calibration.working_point import EDGE, SLOPE_SIGN
from metro.kernel.photodiode import counts, step_v

__all__ = ["BITS_MAX", "FM", "STALE", "CodedFringe", "EmitError"]

BITS_MAX = 24
"""Most bits of a converter that the integers of the emitted code hold."""

FM = 1e15
"""Femtometres in a metre."""

STALE = 0.02
"""How far beyond an extreme, as a part of (high − low)/2, a code says that the extremes have moved.
Our choice: well above noise, well below what a lost alignment does."""

_CODES_MIN = 16


class EmitError(CalibrationError):
    """A converter that cannot be made from what is known."""


@dataclass(frozen=True)
class CodedFringe:
    """One slope of a fringe in converter codes.

    Parameters
    ----------
    extremes : Extremes
        Low and high [V].
    slope : str
        ``"rising"`` or ``"falling"``.
    metres_per_radian : float
        Differential displacement per optical phase [m/rad].
    range_v, offset_v : float
        Full range of the converter and the voltage that reads 0 [V].
    bits : int
        Its resolution, at most `BITS_MAX`.
    is_signed : bool
        Codes on both sides of 0, or from 0 upwards.
    origin : list of str
        Where the values come from, a line each, for the emitted file.
    """

    extremes: Extremes
    slope: str
    metres_per_radian: float
    range_v: float
    offset_v: float
    bits: int
    is_signed: bool = True
    origin: list[str] = field(default_factory=list)

    def __post_init__(self) -> None:
        if self.slope not in SLOPE_SIGN:
            raise EmitError(f"slope must be 'rising' or 'falling', got {self.slope!r}")
        if self.bits > BITS_MAX:
            raise EmitError(f"adc.bits must be ≤ {BITS_MAX} for a converter, got {self.bits}")
        if (
            not self.lowest
            <= self._code(self.extremes.low_v)
            < self._code(self.extremes.high_v)
            <= self.highest + 1
        ):
            other = "unsigned" if self.is_signed else "signed"
            raise EmitError(
                f"the fringe, {self.extremes.low_v:.4g} V … {self.extremes.high_v:.4g} V, leaves "
                f"the codes {self.lowest} … {self.highest} of {self.range_v:.4g} V; "
                f"is --codes {other} right, or adc.offset?"
            )
        if self.last - self.first + 1 < _CODES_MIN:
            raise EmitError(
                f"the fringe must span ≥ {_CODES_MIN} codes, got {self.last - self.first + 1}"
            )

    def _code(self, volts: float) -> float:
        return counts(volts, self.range_v, self.bits, self.offset_v)

    @property
    def lowest(self) -> int:
        """The converter's lowest code."""
        return -(1 << (self.bits - 1)) if self.is_signed else 0

    @property
    def highest(self) -> int:
        """The converter's highest code."""
        return self.lowest + (1 << self.bits) - 1

    @cached_property
    def middle(self) -> float:
        """Mid-fringe as a code, not rounded."""
        return self._code(self.extremes.mid_v)

    @cached_property
    def swing(self) -> float:
        """Half of high − low in codes, not rounded."""
        return self.extremes.swing_v / step_v(self.range_v, self.bits)

    @property
    def first(self) -> int:
        """The lowest code near enough to mid-fringe to be converted."""
        return max(ceil(self.middle - EDGE * self.swing), self.lowest)

    @property
    def last(self) -> int:
        """The highest code near enough to mid-fringe to be converted."""
        return min(floor(self.middle + EDGE * self.swing), self.highest)

    @property
    def stale_below(self) -> int:
        """Codes below this one lie clearly below the fringe's low."""
        return floor(self.middle - (1.0 + STALE) * self.swing)

    @property
    def stale_above(self) -> int:
        """Codes above this one lie clearly above the fringe's high."""
        return ceil(self.middle + (1.0 + STALE) * self.swing)

    @property
    def sign(self) -> int:
        """Whether the displacement grows (+1) or falls (−1) with the code."""
        return -int(SLOPE_SIGN[self.slope])

    def exact_fm(self, codes: NDArray[np.generic]) -> NDArray[np.float64]:
        """Return the displacement of codes in double precision [fm].

        Parameters
        ----------
        codes : ndarray, shape (n,)
            Converter codes between the extremes, whole or not.

        Returns
        -------
        ndarray of float, shape (n,)
            Displacement from mid-fringe [fm], ±arcsin((code − middle)/swing)/(phase per metre).
        """
        u = (codes.astype(np.float64) - self.middle) / self.swing
        return np.asarray(self.sign * self.metres_per_radian * FM * np.arcsin(u))
