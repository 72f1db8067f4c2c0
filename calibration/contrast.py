"""The fringe's contrast, (high − low)/(high + low − 2·dark), from extremes and dark level."""

from calibration import curvature
from calibration.extremes import Extremes
from calibration.term import Term, budget_of
from metro.bench import Bench
from metro.budget import Budget
from metro.measured import Measured

__all__ = ["contrast", "contrast_budget"]


def contrast(bench: Bench, extremes: Extremes, dark: Measured) -> Measured:
    """Return the contrast of a fringe.

    Parameters
    ----------
    bench : Bench
        The converter's curvature, if stated; its scale cancels.
    extremes : Extremes
        Low and high, volts as read.
    dark : Measured
        Level without light [V].

    Returns
    -------
    Measured
        Dimensionless.
    """
    value, budget = contrast_budget(bench, extremes, dark)
    return budget.measured(value)


def contrast_budget(bench: Bench, extremes: Extremes, dark: Measured) -> tuple[float, Budget]:
    """Return the contrast of a fringe and what stands behind it; see `contrast`."""
    dark_v = float(dark.magnitude)
    level_v = extremes.mid_v - dark_v
    value = extremes.swing_v / level_v
    u = extremes.u_of(1.0 / extremes.swing_v, -1.0 / level_v)
    u_dark = float(dark.u_magnitude or 0.0)
    terms = [
        extremes.term(u),
        Term("dark level", dark_v, "V", u_dark, relative=1.0 / level_v, kind="A", dof=dark.dof),
        *curvature.contrast_terms(bench, extremes, dark_v),
    ]
    return value, budget_of(terms, value, "1")[0]
