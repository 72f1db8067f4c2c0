"""The routes to metres that one driven record allows, side by side.

The driven fringe fits everything at once. The mid-fringe slope uses only each line's own amplitude
and the extremes; the harmonic ratios use neither extremes nor mean. What they share (samples,
wavelength, air) is allowed for when they are compared.
"""

import math
from collections.abc import Sequence

import numpy as np
from numpy.typing import NDArray

from calibration.deep_routes import counting_route, recurrence_route
from calibration.fringe_fit import FringeFit
from calibration.lines import fit_lines_si
from calibration.route import Route, in_metres
from calibration.ruler import Ruler
from metro.kernel.bessel import bessels
from metro.measured import Measured

__all__ = ["fringe_routes"]

_SLOPE_RANGE = (
    "each line below 1 rad, working point within 45° of mid-fringe and moving by less than 0.5 rad, "
    "extremes known"
)
_STEADY_RAD = 0.1
_RATIO_RANGE = (
    "0.3 rad to 3.8 rad, working point neither near mid-fringe nor near an extreme, and steady"
)


def _driven(fit: FringeFit, ruler: Ruler | None) -> Route:
    return Route(
        "driven fringe",
        "0.02 rad to 320 rad; below 1 rad with extremes given or a working point that moves by about π",
        fit.phase_amplitude,
        in_metres(fit.phase_amplitude, ruler),
        list(fit.reasons),
    )


def _response(depths: list[float], line: int) -> float:
    """Return 2J1(m_i)/m_i · Π_{j≠i} J0(m_j)."""
    others = math.prod(bessels(0, m)[0] for j, m in enumerate(depths) if j != line)
    depth = depths[line]
    return (2.0 * bessels(1, depth)[1] / depth if depth > 0.0 else 1.0) * others


def _solved_slope(
    amplitudes: list[float], mean: float, fit: FringeFit
) -> tuple[list[float], float] | None:
    """Solve V_i = a·sin φ0·m_i·2J1(m_i)/m_i·Π J0(m_j)·e^(−σ²/2) for the depths; return sin φ0 too."""
    low, high = float(fit.low.magnitude), float(fit.high.magnitude)
    offset, half_span = (high + low) / 2.0, (high - low) / 2.0
    blur = math.exp(-0.5 * fit.working_spread_rad**2)
    depths, sine = [0.0] * len(amplitudes), 1.0
    for _ in range(200):
        null = math.prod(bessels(0, m)[0] for m in depths)
        size = half_span * blur * null
        cosine = (mean - offset) / size if abs(size) > 1e-9 * half_span else math.inf
        if not abs(cosine) < 1.0:
            return None
        sine = math.sqrt(1.0 - cosine**2)
        new = [
            amplitude / (half_span * sine * blur * _response(depths, line))
            for line, amplitude in enumerate(amplitudes)
        ]
        if max(new) > 1.8:  # 2J1 turns back at 1.84 rad
            return None
        moved = max(abs(a - b) for a, b in zip(new, depths, strict=True))
        depths = new
        if moved < 1e-12:
            return depths, sine
    return depths, sine


def _mean(values: NDArray[np.float64], *, steady: bool) -> tuple[float, float]:
    """Return the mean of a record of lines that need not be whole periods, and its uncertainty.

    Tapered, since a piece of a period at the ends would shift it; over the whole record alike but for a
    tenth at each end where the working point moves.
    """
    good = np.isfinite(values)
    place = (np.arange(len(values)) + 0.5) / len(values)
    edge = np.minimum(place, 1.0 - place)
    means = []
    for taper in (0.5, 0.1):
        weight = np.where(good, np.sin(0.5 * np.pi * np.minimum(edge / taper, 1.0)) ** 2, 0.0)
        means.append(float(weight @ np.where(good, values, 0.0) / weight.sum()))
    return means[0] if steady else means[1], abs(means[0] - means[1])


def _slope(
    values: NDArray[np.float64], fit: FringeFit, amplitudes: list[Measured], ruler: Ruler | None
) -> Route:
    """Return the route over the slope at mid-fringe."""
    name = "mid-fringe slope"
    moved = fit.working_range_rad[1] - fit.working_range_rad[0]
    mean, mean_u = _mean(values, steady=moved < _STEADY_RAD)
    solved = _solved_slope([float(a.magnitude) for a in amplitudes], mean, fit)
    if solved is None:
        reason = "the lines and the mean do not fit one slope: too deep, or not near mid-fringe"
        return Route(name, _SLOPE_RANGE, None, None, [reason])
    depths, sine = solved
    reasons = []
    deepest = max(depths + [float(m.magnitude) for m in fit.phase_amplitude])
    if deepest > 1.0:
        reasons.append(f"outside its range: a line of {deepest:.3g} rad, 1 rad is the limit")
    if sine < math.sin(math.pi / 4):
        off = math.degrees(math.acos(sine))
        reasons.append(f"outside its range: the working point is {off:.0f}° off mid-fringe")
    if moved > 0.5:
        reasons.append(f"outside its range: the working point moved by {moved:.2g} rad")
    reasons += [r for r in fit.reasons if r.startswith("depth not determined")]
    span_u = math.hypot(float(fit.low.u_magnitude), float(fit.high.u_magnitude))
    span = span_u / float(fit.high.magnitude - fit.low.magnitude)
    cosine_u = math.hypot(span, 2.0 * mean_u / float(fit.high.magnitude - fit.low.magnitude))
    lean = math.sqrt(1.0 - sine**2) / sine**2 * cosine_u  # cot φ0 · u(cos φ0)/sin φ0
    out = [
        Measured.of(
            m,
            "rad",
            m * math.hypot(float(a.relative_u or 0.0), span, lean),
            min(a.dof, fit.low.dof),
        )
        for m, a in zip(depths, amplitudes, strict=True)
    ]
    return Route(name, _SLOPE_RANGE, out, in_metres(out, ruler), reasons)


def ratio_depth(first: float, second: float, third: float, fourth: float) -> float:
    """Return the depth from the magnitudes of the first four harmonics.

    Parameters
    ----------
    first, second, third, fourth : float
        Amplitudes of the harmonics, ≥ 0, any unit.

    Returns
    -------
    float
        Depth [rad], unsigned, right up to 3.83 rad; nan where a sum vanishes.

    References
    ----------
    V. S. Sudarshanam, K. Srinivasan, Opt. Lett. 14 (1989) 140 (formula from memory):
    m² = 24 J2 J3/((J1 + J3)(J2 + J4)).
    """
    bottom = (first + third) * (second + fourth)
    return math.sqrt(24.0 * second * third / bottom) if bottom > 0.0 else math.nan


def _ratio(harmonics: list[Measured], moved_rad: float) -> tuple[Measured | None, list[str]]:
    """Return the depth of one line from its harmonics, and reasons for distrust."""
    sizes = [float(h.magnitude) for h in harmonics]
    depth = ratio_depth(*sizes)
    if not math.isfinite(depth) or depth <= 0.0:
        return None, ["no third or second harmonic is seen"]
    one, two, three, four = sizes
    slopes = [
        -0.5 * depth / (one + three),
        0.5 * depth * (1.0 / two - 1.0 / (two + four)),
        0.5 * depth * (1.0 / three - 1.0 / (one + three)),
        -0.5 * depth / (two + four),
    ]
    parts = [k * float(h.u_magnitude or 0.0) for k, h in zip(slopes, harmonics, strict=True)]
    got = Measured.of(depth, "rad", math.hypot(*parts), min(h.dof for h in harmonics))
    reasons = []
    if float(got.u_magnitude) > 0.1 * depth:
        reasons.append(
            "harmonics 1 to 4 are not all seen: too shallow, or sin φ or cos φ of the working point "
            "too near zero"
        )
    if depth > 3.8:
        reasons.append(f"outside its range: {depth:.3g} rad, 3.8 rad is the limit")
    if moved_rad > 0.5:
        reasons.append(f"outside its range: the working point moved by {moved_rad:.2g} rad")
    return got, reasons


def _ratios(fit: FringeFit, sets: list[list[Measured]], ruler: Ruler | None) -> Route:
    """Return the route over the ratios of harmonics 1 to 4."""
    moved = fit.working_range_rad[1] - fit.working_range_rad[0]
    depths, reasons = [], []
    for harmonics in sets:
        if len(harmonics) < 4:
            reasons.append("the fourth harmonic lies beyond half the rate, or on another line")
            continue
        depth, why = _ratio(harmonics, moved)
        reasons += why
        if depth is not None:
            depths.append(depth)
    if any(float(m.magnitude) > 3.8 for m in fit.phase_amplitude):
        reasons.append("outside its range: the driven fringe is deeper than 3.8 rad")
    if len(depths) < len(sets):
        return Route("harmonic ratios", _RATIO_RANGE, None, None, list(dict.fromkeys(reasons)))
    unique = list(dict.fromkeys(reasons))
    return Route("harmonic ratios", _RATIO_RANGE, depths, in_metres(depths, ruler), unique)


def _harmonic_frequencies(
    rate_hz: float, lines: Sequence[float], spacing_hz: float
) -> list[list[float]]:
    """Return harmonics 2 to 4 of each line that lie below half the rate and on no other line."""
    out: list[list[float]] = []
    taken = list(lines)
    for line in lines:
        own: list[float] = []
        for order in (2, 3, 4):
            f = order * line
            if f > 0.49 * rate_hz or min(abs(f - other) for other in taken) < spacing_hz:
                own = []
                break
            own.append(f)
        taken += own
        out.append(own)
    return out


def fringe_routes(
    values: NDArray[np.float64],
    rate_hz: float,
    frequencies_hz: Sequence[float],
    fit: FringeFit,
    ruler: Ruler | None = None,
    start_index: int = 0,
) -> list[Route]:
    """Return what each route makes of a driven record.

    Parameters
    ----------
    values : ndarray, shape (n,)
        The record that was fitted; NaN where samples are missing.
    rate_hz : float
        Sample rate [Hz].
    frequencies_hz : sequence of float
        Lines [Hz].
    fit : FringeFit
        The driven fringe of this record, whose extremes the slope uses.
    ruler : Ruler, optional
        Metres per radian.
    start_index : int, optional
        Number of the first sample counted from the recording's first, where t = 0.

    Returns
    -------
    list of Route
        Driven fringe, mid-fringe slope, harmonic ratios, and with one line Bessel recurrences and
        fringe counting; each keeps to its valid range.
    """
    spacing = 4.0 * rate_hz / len(values)
    higher = _harmonic_frequencies(rate_hz, frequencies_hz, spacing)
    # harmonics that are not there would mislead a search for the clock; the driven fringe has it
    stretch = 1.0 + (0.0 if fit.clock_offset is None else float(fit.clock_offset.magnitude))
    wanted = [f * stretch for f in (*frequencies_hz, *(f for own in higher for f in own))]
    lines = fit_lines_si(values, rate_hz, wanted, search_clock=False).lines
    amplitudes = [line.amplitude for line in lines[: len(frequencies_hz)]]
    rest = [line.amplitude for line in lines[len(frequencies_hz) :]]
    sets = []
    for amplitude, own in zip(amplitudes, higher, strict=True):
        sets.append([amplitude, *rest[: len(own)]])
        rest = rest[len(own) :]
    routes = [
        _driven(fit, ruler),
        _slope(values, fit, amplitudes, ruler),
        _ratios(fit, sets, ruler),
    ]
    if len(frequencies_hz) == 1:
        one = (values, rate_hz, float(frequencies_hz[0]), fit, ruler, start_index)
        routes += [recurrence_route(*one), counting_route(*one)]
    return routes
