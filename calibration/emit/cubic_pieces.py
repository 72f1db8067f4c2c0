"""The fringe's arcsine as cubics over stretches of codes, in integers, with a proved error.

With u = (code − middle)/swing the displacement from mid-fringe is ±arcsin(u)/(phase per metre).
The codes are cut into pieces of 2^shift; in each a cubic in ρ/2^(shift−1), ρ the whole distance from
the piece's centre, is evaluated by Horner's rule: the code itself enters exactly.

Error of one value, at most the sum of

- remainder of cubic interpolation at the four Chebyshev nodes of a stretch of half-length h:
  max|f⁗|·h⁴/(4!·2³), with arcsin⁗(u) = (9u + 6u³)/(1 − u²)^(7/2), whose size grows with |u|;
- four coefficients rounded: 4 · 1/2 unit; three divisions cut towards zero: 3 · 1 unit, a unit being
  2^−guard fm and |ρ| ≤ 2^(shift−1);
- rounding to whole femtometres: 1/2 fm;
- double precision in making the coefficients: 1/16 unit, far above 2^31 · 2^−53 · 2^7.

References
----------
P. J. Davis, *Interpolation and Approximation*, 1963, ch. III and IV (from memory): the remainder at
Chebyshev nodes.
"""

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from calibration.emit.coded_fringe import CodedFringe

__all__ = ["CubicPieces"]

FloatArray = NDArray[np.float64]
IntArray = NDArray[np.int64]

_UNITS = 5.0 + 1.0 / 16


@dataclass(frozen=True, eq=False)
class CubicPieces:
    """Cubics in integers and what they are worth.

    Parameters
    ----------
    fringe : CodedFringe
        What they convert.
    shift : int
        A piece has 2^shift codes, shift ≥ 1.
    guard : int
        Coefficients are in 2^−guard fm.
    table : ndarray of int, shape (pieces, 4)
        Coefficients of the powers 0 to 3 of ρ/2^(shift−1).
    interpolation_fm : float
        Bound of the interpolation's remainder [fm].
    """

    fringe: CodedFringe
    shift: int
    guard: int
    table: IntArray
    interpolation_fm: float

    @property
    def rounding_fm(self) -> float:
        """Bound of everything that is rounded or cut [fm]."""
        return _UNITS * 2.0**-self.guard + 0.5

    @property
    def bound_fm(self) -> float:
        """Proved bound of the error against the exact arcsine [fm]."""
        return self.interpolation_fm + self.rounding_fm

    @property
    def product_bits(self) -> int:
        """Bits of the largest product on the way, sign included."""
        inner = int(np.abs(self.table[:, 1:]).sum(axis=1).max()) + 2
        return (inner << (self.shift - 1)).bit_length() + 1

    def displacement_fm(self, codes: IntArray) -> IntArray:
        """Return what the emitted code returns for codes within first … last.

        Parameters
        ----------
        codes : ndarray of int, shape (n,)
            Converter codes.

        Returns
        -------
        ndarray of int, shape (n,)
            Displacement from mid-fringe [fm], by the same integer steps.
        """
        place = codes - self.fringe.first
        piece = self.table[place >> self.shift]
        half = 1 << (self.shift - 1)
        rho = (place & (2 * half - 1)) - half
        total = piece[:, 3]
        for power in (2, 1, 0):
            total = piece[:, power] + _cut(total * rho, half)
        return _cut(total + np.where(total >= 0, 1, -1) * (1 << self.guard >> 1), 1 << self.guard)

    def worst_fm(self) -> float:
        """Return the largest error over every code, tried one by one [fm].

        Returns
        -------
        float
            At most `bound_fm`.
        """
        worst = 0.0
        for start in range(self.fringe.first, self.fringe.last + 1, 1 << 18):
            codes = np.arange(start, min(start + (1 << 18), self.fringe.last + 1))
            error = self.displacement_fm(codes) - self.fringe.exact_fm(codes)
            worst = max(worst, float(np.abs(error).max()))
        return worst

    @property
    def range_fm(self) -> tuple[int, int]:
        """Smallest and largest displacement that comes out [fm]."""
        ends = self.displacement_fm(np.array([self.fringe.first, self.fringe.last]))
        return int(ends.min()), int(ends.max())


def _cut(numerator: IntArray, denominator: int) -> IntArray:
    """Divide as C does: towards zero."""
    quotient: IntArray = np.sign(numerator) * (np.abs(numerator) // denominator)
    return quotient
