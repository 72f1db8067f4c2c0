"""Routes for one deep line: Bessel recurrences of many harmonics, and counting its fringes."""

import math

import numpy as np
from numpy.typing import NDArray

from calibration.bessel_recurrence import recurrence_depth, signed_harmonics
from calibration.fringe_count import count_fringes
from calibration.fringe_fit import FringeFit
from calibration.route import Route, in_metres
from calibration.ruler import Ruler
from metro.measured import Measured

__all__ = ["counting_route", "recurrence_route"]

FloatArray = NDArray[np.float64]

_RECURRENCE_RANGE = (
    "one line of 2.5 rad to 100π rad, harmonics up to 5 above the depth below half the rate, working "
    "point steady"
)
_COUNTING_RANGE = "one line of 6.3 rad and more, at most a third of a fringe per sample"
_NOISE_FLOOR = 1e-6  # of the half span: rounding, where the record has no noise


def _angle(
    fit: FringeFit, count: int, rate_hz: float, line_hz: float, start_index: int
) -> FloatArray:
    """Return the phase of the line's own motion at each sample."""
    stretch = 1.0 + (0.0 if fit.clock_offset is None else float(fit.clock_offset.magnitude))
    time = (start_index + np.arange(count)) / rate_hz
    return np.asarray(2.0 * np.pi * line_hz * stretch * time + float(fit.phase[0].magnitude))


def recurrence_route(
    values: FloatArray,
    rate_hz: float,
    line_hz: float,
    fit: FringeFit,
    ruler: Ruler | None = None,
    start_index: int = 0,
) -> Route:
    """Return the route over the Bessel recurrences.

    Parameters
    ----------
    values : ndarray, shape (n,)
        The record that was fitted; NaN where samples are missing.
    rate_hz, line_hz : float
        Sample rate and line [Hz].
    fit : FringeFit
        The driven fringe: gives the phase of the line's motion, and whether the working point stayed.
    ruler : Ruler, optional
        Metres per radian.
    start_index : int, optional
        Number of the first sample counted from the recording's first, where t = 0.

    Returns
    -------
    Route
        Refused with reasons outside its range.
    """
    name, expected = "Bessel recurrences", float(fit.phase_amplitude[0].magnitude)
    reasons = []
    if not 2.5 <= expected <= 100.0 * math.pi:
        reasons.append(f"outside its range: {expected:.3g} rad, 2.5 rad to 100π rad are the limits")
    available = math.floor(0.49 * rate_hz / line_hz)
    if available < max(expected + 5.0, 7.0):
        reasons.append(
            f"outside its range: {available} harmonics lie below half the rate, {expected + 5.0:.3g} are "
            "needed"
        )
    moved = fit.working_range_rad[1] - fit.working_range_rad[0]
    if moved > 0.5:
        reasons.append(f"outside its range: the working point moved by {moved:.2g} rad")
    if reasons:
        return Route(name, _RECURRENCE_RANGE, None, None, reasons)
    angle = _angle(fit, len(values), rate_hz, line_hz, start_index)
    harmonics, u = signed_harmonics(values, angle, min(available, math.ceil(expected) + 8))
    half_span = 0.5 * float(fit.high.magnitude - fit.low.magnitude)
    depth, depth_u, misfit = recurrence_depth(harmonics, max(u, _NOISE_FLOOR * half_span))
    if not math.isfinite(depth + depth_u):
        return Route(name, _RECURRENCE_RANGE, None, None, ["no depth fits the harmonics"])
    if misfit > 5.0 * (1.0 + 8.0 / len(harmonics)):  # few harmonics: noise, too, is known from few
        reasons.append(
            f"the harmonics are not those of one steady line: χ² is {misfit:.2g} times its degrees of "
            "freedom"
        )
    depths = [Measured.of(depth, "rad", depth_u * math.sqrt(max(misfit, 1.0)))]
    return Route(name, _RECURRENCE_RANGE, depths, in_metres(depths, ruler), reasons)


def counting_route(
    values: FloatArray,
    rate_hz: float,
    line_hz: float,
    fit: FringeFit,
    ruler: Ruler | None = None,
    start_index: int = 0,
) -> Route:
    """Return the route over the number of fringes per period, ISO 16063-11, method 1.

    Parameters
    ----------
    values : ndarray, shape (n,)
        The record that was fitted; NaN where samples are missing.
    rate_hz, line_hz : float
        Sample rate and line [Hz].
    fit : FringeFit
        The driven fringe: gives extremes and the moments at which the mirror turns.
    ruler : Ruler, optional
        Metres per radian.
    start_index : int, optional
        Number of the first sample counted from the recording's first, where t = 0.

    Returns
    -------
    Route
        Refused with reasons outside its range.
    """
    name, expected = "fringe counting", float(fit.phase_amplitude[0].magnitude)
    reasons = []
    if expected < 6.3:
        reasons.append(f"outside its range: {expected:.3g} rad, 6.3 rad is the least")
    fastest = expected * line_hz / rate_hz
    if fastest > 1.0 / 3.0:
        reasons.append(
            f"outside its range: {fastest:.2g} fringes pass in a sample, a third is the limit"
        )
    if reasons:
        return Route(name, _COUNTING_RANGE, None, None, reasons)
    drive = np.cos(_angle(fit, len(values), rate_hz, line_hz, start_index))
    extremes = float(fit.low.magnitude), float(fit.high.magnitude)
    count = count_fringes(values, rate_hz, drive, extremes=extremes)
    if count.per_period is None:
        return Route(
            name, _COUNTING_RANGE, None, None, ["fewer than two whole half periods, or unequal"]
        )
    # R_f fringes in a period are 4m of phase
    fringes, u = count.per_period
    depths = [Measured.of(0.5 * math.pi * fringes, "rad", 0.5 * math.pi * u)]
    return Route(name, _COUNTING_RANGE, depths, in_metres(depths, ruler), list(count.reasons))
