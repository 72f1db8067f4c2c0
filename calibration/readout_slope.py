"""The readout's slope: volts per metre of differential displacement at mid-fringe."""

from math import sqrt

from calibration import curvature
from calibration.extremes import Extremes
from calibration.readout import Readout
from calibration.term import Term, budget_of
from metro.budget import Budget
from metro.measured import Measured

__all__ = ["readout_slope"]


def readout_slope(readout: Readout, extremes: Extremes, drift: Term) -> tuple[Measured, Budget]:
    """Return volts per metre at mid-fringe, rising slope, and what stands behind it.

    Parameters
    ----------
    readout : Readout
        Light and electronics of the bench.
    extremes : Extremes
        The fringe's extremes, volts as read.
    drift : Term
        Change of high − low from one recording to the next (relative).

    Returns
    -------
    tuple of (Measured, Budget)
        Slope [V/m], in volts at the converter's input.
    """
    scale = 1.0 + readout.bench.magnitude("adc.reference", 0.0)
    slope = extremes.swing_v / scale * readout.phase_per_metre
    share = 1.0 / sqrt(extremes.scans) if extremes.scans else 0.0
    u = extremes.u_of(1.0, 0.0) / extremes.swing_v
    terms = [
        *readout.ruler_terms(-1.0),
        extremes.term(u),
        drift.with_relative(share),
        *readout.reference_term(-1.0),
        *curvature.swing_terms(readout.bench, extremes),
    ]
    budget, _ = budget_of(terms, slope, "V/m")
    return budget.measured(slope), budget
