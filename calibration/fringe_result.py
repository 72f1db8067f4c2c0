"""From the fit's parameters to what is asked for: extremes, slope, working phase, depths, metres."""

import math
from collections.abc import Callable

import numpy as np

from calibration.fringe_fit import FringeFit
from calibration.fringe_search import Found
from calibration.ruler import Ruler
from metro.measured import Measured

__all__ = ["depths_of", "fringe_result"]


def _measured(found: Found, value: float, gradient: dict[int, float], unit: str) -> Measured:
    """Return a value whose derivatives by some parameters are known."""
    places = list(gradient)
    weights = np.array([gradient[place] for place in places])
    variance = float(weights @ found.covariance[np.ix_(places, places)] @ weights)
    return Measured.of(value, unit, math.sqrt(max(variance, 0.0)), found.dof)


def depths_of(found: Found) -> list[tuple[float, float]]:
    """Return the depth of each line.

    Parameters
    ----------
    found : Found
        Finished fit.

    Returns
    -------
    list of tuple
        (depth, standard uncertainty) [rad].
    """
    out = []
    for line in range(found.model.n_lines):
        got = _depth(found, line)
        out.append((float(got.magnitude), float(got.u_magnitude)))
    return out


def _depth(found: Found, line: int) -> Measured:
    """Return the depth; noise across a phasor lengthens it by u²/2m, which is taken off."""
    place = 2 + 2 * line
    re, im = (float(x) for x in found.theta[place : place + 2])
    depth = math.hypot(re, im)
    safe = max(depth, 1e-300)
    got = _measured(found, depth, {place: re / safe, place + 1: im / safe}, "rad")
    across = np.array([-im, re]) / safe
    sideways = float(across @ found.covariance[place : place + 2, place : place + 2] @ across)
    if depth**2 < 9.0 * sideways:
        return got
    return Measured.of(math.sqrt(depth**2 - sideways), "rad", got.u_magnitude, got.dof)


def _line_phase(found: Found, line: int, start_index: int, flip: bool) -> Measured:  # private
    """Return the phase at t = 0, carried back from the middle of the part fitted."""
    model = found.model
    re, im = (float(x) for x in found.theta[2 + 2 * line : 4 + 2 * line])
    square = max(re * re + im * im, 1e-300)
    gradient = {2 + 2 * line: -im / square, 3 + 2 * line: re / square}
    back = start_index + model.centre
    turn = float(model.turns[line])
    stretch = 0.0
    if model.clock:
        stretch = float(found.theta[model.fixed - 1])
        gradient[model.fixed - 1] = -turn * back
    phase = math.atan2(im, re) - turn * (1.0 + stretch) * back + (math.pi if flip else 0.0)
    return _measured(found, math.remainder(phase, 2.0 * math.pi), gradient, "rad")


def _working_phase(found: Found) -> tuple[Measured, bool]:
    """Return φ at the first sample between 0 and π, and whether the sign was turned for that."""
    model = found.model
    raw = float(model.drift(found.theta, np.zeros(1))[0])
    phase = math.remainder(raw, 2.0 * math.pi)
    flip = phase < 0.0
    weights = [1.0] if model.pieces == 0 else [1 / 6, 4 / 6, 1 / 6]
    gradient = {model.fixed + k: weight for k, weight in enumerate(weights)}
    return _measured(found, abs(phase), gradient, "rad"), flip


def _slope(found: Found, flip: bool) -> Measured:  # private
    """Return dV/dφ at the first sample, −a·sin φ."""
    model, half_span = found.model, float(found.theta[1])
    phase = float(model.drift(found.theta, np.zeros(1))[0])
    sign = -1.0 if flip else 1.0
    weights = [1.0] if model.pieces == 0 else [1 / 6, 4 / 6, 1 / 6]
    gradient = {1: -sign * math.sin(phase)}
    for k, weight in enumerate(weights):
        gradient[model.fixed + k] = -sign * half_span * math.cos(phase) * weight
    return _measured(found, -sign * half_span * math.sin(phase), gradient, "1")


def _scaled(
    measured: Measured, factor: float, relative_u: float, unit: str, dof: float
) -> Measured:
    """Return a measured value times a factor of its own relative uncertainty."""
    value, own = float(measured.magnitude) * factor, float(measured.u_magnitude) * abs(factor)
    other = abs(value) * relative_u
    u = math.hypot(own, other)
    joint = measured.dof if not other else math.inf
    if other and u:  # Welch–Satterthwaite
        joint = u**4 / max(own**4 / measured.dof + other**4 / dof, 1e-300)
    return Measured.of(value, unit, u, joint)


def _contrast(found: Found, dark: float | None, dark_u: float) -> Measured | None:
    """Return (high − low)/(high + low − 2·dark) = a/(c − dark)."""
    if dark is None:
        return None
    offset, half_span = float(found.theta[0]) - dark, float(found.theta[1])
    if offset <= 0.0:
        return None
    got = _measured(found, half_span / offset, {0: -half_span / offset**2, 1: 1.0 / offset}, "1")
    u = math.hypot(float(got.u_magnitude), half_span / offset**2 * dark_u)
    return Measured.of(half_span / offset, "1", u, found.dof)


def _upright(found: Found) -> Found:
    """Return the fit with a positive half span: a negative one is the same with φ turned by π."""
    if found.theta[1] > 0.0:
        return found
    theta, covariance = found.theta.copy(), found.covariance.copy()
    theta[1] = -theta[1]
    theta[found.model.fixed :] += math.pi
    covariance[1, :] *= -1.0
    covariance[:, 1] *= -1.0
    return Found(found.model, theta, found.squares, covariance, found.dof, found.whitening)


def _per(unit: str, other: str) -> str:
    return f"1/{other}" if unit == "1" else f"{unit}/{other}"


def fringe_result(
    found: Found,
    *,
    start_index: int,
    value_unit: str,
    ruler: Ruler | None,
    dark: float | None,
    dark_u: float,
    reasons: Callable[[Found], list[str]],
) -> FringeFit:
    """Return what a finished fit means.

    Parameters
    ----------
    found : Found
        Finished fit.
    start_index : int
        Number of the first sample counted from the recording's first, where t = 0.
    value_unit : str
        The record's unit.
    ruler : Ruler or None
        Metres per radian, where the wavelength is known.
    dark : float or None
        Level without light, in the record's unit.
    dark_u : float
        Its standard uncertainty.
    reasons : callable
        Gives the reasons for distrust of a fit.

    Returns
    -------
    FringeFit
        With u of everything.
    """
    found = _upright(found)
    model, theta = found.model, found.theta
    working, flip = _working_phase(found)
    slope = _slope(found, flip)
    slope = Measured.of(slope.magnitude, _per(value_unit, "rad"), slope.u_magnitude, slope.dof)
    depths = [_depth(found, line) for line in range(model.n_lines)]
    course = model.drift(theta, np.linspace(0.0, 1.0, 401)) * (-1.0 if flip else 1.0)
    course = course + float(working.magnitude) - course[0]
    count = int(np.count_nonzero(np.isfinite(model.values)))
    return FringeFit(
        low=_measured(found, float(theta[0] - theta[1]), {0: 1.0, 1: -1.0}, value_unit),
        high=_measured(found, float(theta[0] + theta[1]), {0: 1.0, 1: 1.0}, value_unit),
        contrast=_contrast(found, dark, dark_u),
        slope=slope,
        slope_per_metre=_per_metre(slope, ruler, value_unit),
        working_phase=working,
        working_range_rad=(float(course.min()), float(course.max())),
        working_spread_rad=float(course.std()),
        phase_amplitude=depths,
        phase=[_line_phase(found, line, start_index, flip) for line in range(model.n_lines)],
        displacement_amplitude=None
        if ruler is None
        else [_scaled(d, ruler.metres_per_rad, ruler.relative_u, "m", ruler.dof) for d in depths],
        clock_offset=None
        if not model.clock
        else _measured(found, float(theta[model.fixed - 1]), {model.fixed - 1: 1.0}, "1"),
        residual_rms=math.sqrt(found.squares / count),
        used_samples=count,
        value_unit=value_unit,
        reasons=reasons(found),
        working_course_rad=course,
    )


def _per_metre(slope: Measured, ruler: Ruler | None, value_unit: str) -> Measured | None:
    if ruler is None:
        return None
    return _scaled(
        slope, 1.0 / ruler.metres_per_rad, ruler.relative_u, _per(value_unit, "m"), ruler.dof
    )
