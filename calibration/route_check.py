"""The slope route against others: the driven fringe from the same samples, a bench that runs freely.

The slope inverts each sample between the extremes and fits lines to the phase; the driven fringe fits
all lines, the working point and the extremes to the volts at once (ISO 16063-11 method 3 carried
over to one photodiode). They share samples and ruler, so that only their methods can differ.
"""

from dataclasses import dataclass
from math import sqrt
from typing import Any

import numpy as np
from numpy.typing import NDArray

from calibration.driven_fringe import fit_driven_fringe_si
from calibration.errors import CalibrationError
from calibration.extremes import Extremes
from calibration.line_fit import LineFit
from calibration.slope_line import is_driven
from calibration.term import ROUTES, Term

__all__ = ["SAMPLES", "RouteCheck", "compare_routes", "route_term"]

FloatArray = NDArray[np.float64]

SAMPLES = 20_000  # of the recording: its fit to the volts takes a second or two
_K95 = 1.96


@dataclass(frozen=True)
class RouteCheck:
    """Two routes at one line.

    Parameters
    ----------
    frequency_hz : float
        Of the line [Hz].
    one, other : float
        Its amplitude, or its coefficient, by either route, in one unit.
    u : float
        Standard uncertainty of their difference, in that unit: the noise of both fits and what else
        they do not have in common.
    routes : str
        Both routes in words.
    """

    frequency_hz: float
    one: float
    other: float
    u: float
    routes: str = "slope and driven fringe"

    @property
    def difference(self) -> float:
        """The other minus the one, relative."""
        return self.other / self.one - 1.0

    @property
    def excess_u(self) -> float:
        """Relative standard uncertainty from what noise does not explain of the difference.

        The excess is taken as the half-width of a rectangular distribution: common practice.
        """
        own = self.u / self.one
        return sqrt(max(0.0, self.difference**2 - own**2)) / sqrt(3.0)

    def to_dict(self) -> dict[str, Any]:
        """Return it as a check of the calibration."""
        error = abs(self.difference) * self.one / (_K95 * self.u) if self.u else 0.0
        return {
            "name": f"{self.routes} at {self.frequency_hz:g} Hz "
            f"(they differ by {100 * self.difference:+.2g} %)",
            "normalised_error": error,
            "agree": error <= 1.0,
        }


def compare_routes(
    volts: FloatArray,
    rate_hz: float,
    fit: LineFit,
    extremes: Extremes,
    phase_rad: FloatArray,
    name: str = "slope",
) -> list[RouteCheck]:
    """Return the driven fringe beside another route at every driven line of a stretch of a recording.

    Parameters
    ----------
    volts : ndarray, shape (n,)
        Photodiode samples [V], NaN where missing; the first ``SAMPLES`` count.
    rate_hz : float
        Samples a second [Hz].
    fit : LineFit
        The other route's fit of the whole recording: its lines in the board's time.
    extremes : Extremes
        The fringe's extremes.
    phase_rad : ndarray, shape (n,)
        The samples inverted by the other route, NaN where they are not.
    name : str
        The other route.

    Returns
    -------
    list of RouteCheck
        One a driven line; empty where the driven fringe cannot be fitted or is distrusted.
    """
    from calibration.lines import fit_lines_si

    lines = [line for line in fit.lines if is_driven(line)]
    offset = 0.0 if fit.clock_offset is None else float(fit.clock_offset.magnitude)
    frequencies_hz = [line.frequency_hz * (1.0 + offset) for line in lines]
    stretch = np.ascontiguousarray(volts[:SAMPLES])
    u_low, u_high = np.sqrt(np.diag(extremes.covariance))
    try:
        fringe = fit_driven_fringe_si(
            stretch,
            rate_hz,
            frequencies_hz,
            low=extremes.low_v,
            high=extremes.high_v,
            low_u=float(u_low),
            high_u=float(u_high),
            value_unit="V",
        )
        inverted = np.ascontiguousarray(phase_rad[:SAMPLES])
        sloped = fit_lines_si(
            inverted, rate_hz, frequencies_hz, value_unit="rad", search_clock=False
        )
    except CalibrationError:
        return []
    if not fringe.is_trustworthy:
        return []
    return [
        RouteCheck(
            line.frequency_hz,
            float(by_slope.amplitude.magnitude),
            float(by_fringe.magnitude),
            float(np.hypot(by_slope.amplitude.u_magnitude, by_fringe.u_magnitude)),
            f"{name} and driven fringe",
        )
        for line, by_slope, by_fringe in zip(
            lines, sloped.lines, fringe.phase_amplitude, strict=True
        )
    ]


def route_term(checks: list[RouteCheck] | None, frequency_hz: float) -> Term:
    """Return the routes' disagreement as an entry of a line's budget.

    Parameters
    ----------
    checks : list of RouteCheck or None
        None where the routes were not compared.
    frequency_hz : float
        Of the line [Hz].

    Returns
    -------
    Term
        Without u where they agree within their noise, or were not compared, which its name says.
    """
    found = [c for c in checks or () if abs(c.frequency_hz / frequency_hz - 1.0) < 1e-3]
    if not found:
        return Term(f"{ROUTES} (not compared)", None, "1", 0.0, relative=1.0)
    u = max(check.excess_u for check in found)
    return Term(ROUTES, None, "1", u, relative=1.0, distribution="rectangular")
