"""The uncertainty of a coefficient without what a later result with the same bench shares with it."""

from math import inf, sqrt

from calibration.term import ADC_REFERENCE, FRINGE_EXTREMES, POWER_DRIFT, RULER
from metro.budget import Budget

__all__ = ["DRIVE", "own_u"]

DRIVE = ("drive reading", "drive amplifier")
_READOUT = ("readout response", "anti-alias response", "channel delay")
_SHARED = frozenset({*RULER, ADC_REFERENCE, FRINGE_EXTREMES, *DRIVE, *_READOUT})


def own_u(budget: Budget) -> tuple[float, float]:
    """Return the u of a coefficient without what today's result shares with it, and its dof.

    Parameters
    ----------
    budget : Budget
        Of a magnitude or of a phase.

    Returns
    -------
    tuple of float
        Standard uncertainty, in the budget's unit, and degrees of freedom. The power drifts from
        recording to recording and counts twice: once in the calibration, once today.
    """
    variance, weak = 0.0, 0.0
    for row in budget.contributions:
        if row.name in _SHARED:
            continue
        own = (row.sensitivity * row.u) ** 2 * (2.0 if row.name.startswith(POWER_DRIFT) else 1.0)
        variance += own
        weak += own**2 / row.dof
    return sqrt(variance), variance**2 / weak if weak > 0 else inf
