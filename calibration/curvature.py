"""The converter's curvature in a coefficient: its integral non-linearity, as the bench states it.

Curvature is a fraction of the range, added to what is read at x = V/(range/2): 1 − x² for the
quadratic part, x³ − x for the cubic one, both zero at the ends. Extremes, line and drive are read
through the same curve, so that only what differs between them stays.
"""

from collections.abc import Callable, Sequence
from dataclasses import dataclass

import numpy as np

from calibration.extremes import Extremes
from calibration.term import Term
from metro.bench import Bench

__all__ = ["contrast_terms", "line_terms", "swing_terms"]

_SHAPES = {
    "adc.quadratic": ("ADC curvature (quadratic)", np.poly1d([-1.0, 0.0, 1.0])),
    "adc.cubic": ("ADC curvature (cubic)", np.poly1d([1.0, 0.0, -1.0, 0.0])),
}


@dataclass(frozen=True)
class _Bend:
    """One shape of curvature: volts added per unit of its coefficient."""

    shape: np.poly1d
    half_range_v: float

    def volts(self, level_v: float) -> float:
        return 2 * self.half_range_v * float(self.shape(level_v / self.half_range_v))

    def slope(self, level_v: float) -> float:
        return 2 * float(self.shape.deriv()(level_v / self.half_range_v))

    def swing_v(self, extremes: Extremes) -> float:
        """Change of (high − low)/2."""
        return (self.volts(extremes.high_v) - self.volts(extremes.low_v)) / 2

    def mid_v(self, extremes: Extremes) -> float:
        """Change of (high + low)/2."""
        return (self.volts(extremes.high_v) + self.volts(extremes.low_v)) / 2

    def sine(self, extremes: Extremes, level_v: float) -> float:
        """Relative change of swing·|sin φ|, by which a line is divided."""
        offset_v = level_v - extremes.mid_v
        shift_v = self.volts(level_v) - self.mid_v(extremes)
        push = extremes.swing_v * self.swing_v(extremes) - offset_v * shift_v
        return push / (extremes.swing_v**2 - offset_v**2)


def line_terms(
    bench: Bench, extremes: Extremes, cosines: Sequence[float], *, drive_read: bool
) -> list[Term]:
    """Return the curvature in a line at its working points, against the extremes.

    Parameters
    ----------
    bench : Bench
        ``adc.quadratic``, ``adc.cubic`` with their u, and ``adc.range``.
    extremes : Extremes
        The fringe's extremes.
    cosines : sequence of float
        cos φ of the record: its mean, or levels that stand for equal parts of it.
    drive_read : bool
        Whether the drive was read, around zero, by the same converter.

    Returns
    -------
    list of Term
        One a stated shape.
    """
    levels_v = [extremes.mid_v + cosine * extremes.swing_v for cosine in cosines]

    def effect(bend: _Bend) -> float:
        each = [bend.slope(level_v) - bend.sine(extremes, level_v) for level_v in levels_v]
        relative = float(np.mean(each))
        return relative - bend.slope(0.0) if drive_read else relative

    return _terms(bench, effect)


def swing_terms(bench: Bench, extremes: Extremes) -> list[Term]:
    """Return the curvature in high − low."""
    return _terms(bench, lambda bend: -bend.swing_v(extremes) / extremes.swing_v)


def contrast_terms(bench: Bench, extremes: Extremes, dark_v: float) -> list[Term]:
    """Return the curvature in (high − low)/(high + low − 2·dark)."""

    def effect(bend: _Bend) -> float:
        level = (bend.mid_v(extremes) - bend.volts(dark_v)) / (extremes.mid_v - dark_v)
        return level - bend.swing_v(extremes) / extremes.swing_v

    return _terms(bench, effect)


def _terms(bench: Bench, effect: Callable[[_Bend], float]) -> list[Term]:
    terms = []
    for key, (name, shape) in _SHAPES.items():
        if bench.get(key) is not None:
            bend = _Bend(shape, bench.magnitude("adc.range") / 2)
            kind = bench.distribution(key)
            relative = effect(bend)
            value, u = bench.magnitude(key), bench.u(key)
            terms.append(Term(name, value, "1", u, relative=relative, distribution=kind))
    return terms
