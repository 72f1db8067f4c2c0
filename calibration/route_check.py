"""The slope route against the driven fringe: two ways from the same samples to radians.

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
from calibration.working_point import invert_fringe

__all__ = ["SAMPLES", "RouteCheck", "compare_routes", "route_term"]

FloatArray = NDArray[np.float64]

SAMPLES = 20_000  # of the recording: its fit to the volts takes a second or two
_K95 = 1.96


@dataclass(frozen=True)
class RouteCheck:
    """The two routes at one line, on one stretch of a recording.

    Parameters
    ----------
    frequency_hz : float
        Of the line [Hz].
    slope_rad, fringe_rad : float
        Its amplitude by either route [rad].
    u_rad : float
        Standard uncertainty of their difference [rad], from the noise of both fits.
    """

    frequency_hz: float
    slope_rad: float
    fringe_rad: float
    u_rad: float

    @property
    def difference(self) -> float:
        """Driven fringe minus slope, relative."""
        return self.fringe_rad / self.slope_rad - 1.0

    @property
    def excess_u(self) -> float:
        """Relative standard uncertainty from what noise does not explain of the difference.

        The excess is taken as the half-width of a rectangular distribution: common practice.
        """
        own = self.u_rad / self.slope_rad
        return sqrt(max(0.0, self.difference**2 - own**2)) / sqrt(3.0)

    def to_dict(self) -> dict[str, Any]:
        """Return it as a check of the calibration."""
        error = abs(self.difference) * self.slope_rad / (_K95 * self.u_rad) if self.u_rad else 0.0
        return {
            "name": f"slope and driven fringe at {self.frequency_hz:g} Hz "
            f"(they differ by {100 * self.difference:+.2g} %)",
            "normalised_error": error,
            "agree": error <= 1.0,
        }


def compare_routes(
    volts: FloatArray, rate_hz: float, fit: LineFit, extremes: Extremes, slope: str
) -> list[RouteCheck]:
    """Return both routes at every driven line of a stretch of a lines recording.

    Parameters
    ----------
    volts : ndarray, shape (n,)
        Photodiode samples [V], NaN where missing; the first ``SAMPLES`` count.
    rate_hz : float
        Samples a second [Hz].
    fit : LineFit
        The slope route's fit of the whole recording: its lines in the board's time.
    extremes : Extremes
        The fringe's extremes.
    slope : str
        ``"rising"`` or ``"falling"``.

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
        phase_rad = invert_fringe(stretch, extremes, slope).phase_rad
        sloped = fit_lines_si(
            phase_rad, rate_hz, frequencies_hz, value_unit="rad", search_clock=False
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
