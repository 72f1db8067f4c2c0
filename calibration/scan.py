"""The scan: the extremes of the fringe from a sweep over whole fringes.

The mirror's motion need not be known: a ramp, a triangle or the bench's own drift, with vibration on
top. The extremes are the edges of the values' distribution (never minimum and maximum, which
exaggerate), and their uncertainty is the scatter from pass to pass.
"""

import math
from dataclasses import dataclass, field, replace

import numpy as np
from numpy.typing import NDArray

from calibration.edge import Edge, fit_edge
from calibration.errors import CalibrationError
from calibration.fringe_law import law_harmonics
from calibration.passes import number_passes
from calibration.smoother import noise_gain, smooth, smoothing_length
from calibration.swept_record import record_noise

__all__ = ["ScanFit", "clipping", "fit_scan"]

_MIN_SAMPLES = 40


@dataclass(frozen=True)
class ScanFit:
    """The fringe's extremes.

    Attributes
    ----------
    low, high : float
        Extremes of the fringe, in the record's unit, at the middle of the scan.
    covariance : ndarray, shape (2, 2)
        Covariance of (low, high), unit squared.
    dof : float
        Effective degrees of freedom of half the span.
    harmonics : ndarray, shape (2,) or (0,)
        cos 2φ and cos 3φ of the fringe law relative to cos φ; empty where too few fringes show them.
    harmonics_u : ndarray, shape (2,) or (0,)
        Their standard uncertainties.
    passes : tuple of int
        Passes over the low and over the high extreme.
    drift : tuple of float
        Change of low and high from the scan's beginning to its end, in the record's unit.
    reasons : list of str
        Why the extremes must not be trusted; empty when nothing was found.
    """

    low: float
    high: float
    covariance: NDArray[np.float64]
    dof: float
    harmonics: NDArray[np.float64]
    harmonics_u: NDArray[np.float64]
    passes: tuple[int, int]
    drift: tuple[float, float]
    reasons: list[str] = field(default_factory=list)

    @property
    def low_u(self) -> float:
        """Standard uncertainty of ``low``.

        Returns
        -------
        float
            In the record's unit.
        """
        return math.sqrt(self.covariance[0, 0])

    @property
    def high_u(self) -> float:
        """Standard uncertainty of ``high``.

        Returns
        -------
        float
            In the record's unit.
        """
        return math.sqrt(self.covariance[1, 1])

    @property
    def is_trustworthy(self) -> bool:
        """Whether no reason for distrust was found.

        Returns
        -------
        bool
            False where there are reasons.
        """
        return not self.reasons


def _converter_step(values: NDArray[np.float64]) -> float:
    """Return the converter's step, 0 where the values are as good as continuous."""
    levels = np.unique(values)
    if len(levels) < 3 or len(levels) > len(values) / 3:
        return 0.0
    gaps = np.diff(levels)
    return float(np.median(gaps[gaps < 1.5 * np.quantile(gaps, 0.1)]))


def _clipped(values: NDArray[np.float64], step: float) -> list[str]:
    """Return at which end samples pile up as no fringe does.

    The last step of an unclipped fringe holds at most 1/(√2 − 1) = 2.4 times what the one before
    holds, as the distribution rises as 1/√distance.
    """
    width = step or 1e-6 * float(np.ptp(values))
    out = []
    for name, level in (("bottom", -values), ("top", values)):
        end = float(level.max())
        last = int(np.count_nonzero(level > end - 0.5 * width))
        before = int(np.count_nonzero(level > end - 1.5 * width)) - last
        if last > max(20, 6 * before, 0.003 * len(values)):
            out.append(
                f"the {name} is clipped: {last} samples of {len(values)} lie on the last value"
            )
    return out


def clipping(values: NDArray[np.float64]) -> list[str]:
    """Return at which ends a record is clipped.

    Parameters
    ----------
    values : ndarray, shape (n,)
        Record, any unit; NaN where samples are missing.

    Returns
    -------
    list of str
        One line an end; empty where samples pile up at neither.
    """
    good = values[np.isfinite(values)]
    return _clipped(good, _converter_step(good))


def _seen(edge: Edge) -> NDArray[np.bool_]:
    """Return which passes have samples enough near the edge to count."""
    return np.asarray(edge.weight > min(1e-3, 0.5 / len(edge.weight)))


def _variance(edge: Edge, together: float) -> tuple[float, float]:
    """Return the variance of an edge and its degrees of freedom, from the scatter of its passes.

    A pass's pull has a variance proportional to its weight; ``together`` is how many samples move
    together, which lifts the independent samples' variance to a floor.
    """
    used = _seen(edge)
    n_used = int(used.sum())
    floor = 0.8 * edge.model_u**2 * together + (0.05 * edge.noise) ** 2
    if n_used < 3:
        return 4.0 * floor, float(max(n_used, 1))
    single = edge.pull[used] / np.sqrt(edge.weight[used])
    scatter = float(np.sum(single**2) / (n_used - 1))
    memory = _memory(single)
    return max(scatter * memory, floor), float(n_used - 1) / memory


def _memory(single: NDArray[np.float64]) -> float:
    """Return by how much slow power noise, common to neighbouring passes, lifts the variance.

    Bartlett-weighted autocorrelations (Newey & West 1987), used only where the first is clearly
    there: 1.65 standard deviations of white noise above its mean, −1/n.
    """
    count = len(single)
    norm = float(np.sum(single**2))
    reach = min(count // 4, 6)
    if norm <= 0.0 or reach < 2:
        return 1.0
    lags = [float(np.sum(single[k:] * single[:-k])) / norm for k in range(1, reach + 1)]
    if lags[0] < 1.65 / math.sqrt(count) - 1.0 / count:
        return 1.0
    lift = sum(2.0 * (1.0 - k / (reach + 1)) * r for k, r in enumerate(lags, start=1))
    return max(1.0, 1.0 + lift) * count / (count - reach)


def _trend(edge: Edge, when: NDArray[np.float64]) -> tuple[float, float]:
    """Return the drift of an edge over the scan and its standard uncertainty."""
    used = _seen(edge)
    if used.sum() < 6:
        return 0.0, math.inf
    weight, time = edge.weight[used], when[used]
    single = edge.pull[used] / weight
    time = time - np.average(time, weights=weight)
    norm = float(np.sum(weight * time**2))
    slope = float(np.sum(weight * time * single) / norm)
    rest = float(np.sum(weight * (single - slope * time) ** 2) / (used.sum() - 2))
    return slope, math.sqrt(rest / norm)


def _edges(
    values: NDArray[np.float64], noise: float, step: float
) -> tuple[Edge, Edge, NDArray[np.int64]]:
    """Fit both edges; return the lower one (upper edge of −V), the upper one and the passes."""
    low, high = np.quantile(values, [0.005, 0.995])
    passes = number_passes(values, float(low), float(high))
    half_span = float(high - low) / 2.0
    for _ in range(2):
        upper = fit_edge(values, passes, half_span, noise, step)
        lower = fit_edge(-values, passes, half_span, noise, step)
        half_span = max((upper.value + lower.value) / 2.0, 0.5 * half_span)
        noise = min(noise, 1.5 * min(upper.noise, lower.noise))  # the sharper edge knows the noise
    return lower, upper, passes


def _reasons(lower: Edge, upper: Edge, low: float, high: float, noise: float) -> list[str]:
    """Return why the extremes must not be trusted."""
    reasons = []
    seen = [int(np.sum(_seen(edge))) for edge in (lower, upper)]
    if sum(seen) < 3 or min(seen) < 1:
        reasons.append(
            f"the scan covers less than one whole fringe: {seen[1]} passes over the top, "
            f"{seen[0]} over the bottom"
        )
    limit = 4.0 * noise + 0.02 * (high - low)
    for name, edge in (("bottom", lower), ("top", upper)):
        if edge.noise > limit:
            reasons.append(
                f"the fringe's {name} is not sharp: it spreads by {edge.noise:.3g}, "
                f"the noise is {noise:.3g}"
            )
    return reasons


def _law_reasons(shape: NDArray[np.float64], shape_u: NDArray[np.float64]) -> list[str]:
    """Return which harmonics of the fringe law are clearly above 1 %."""
    causes = {2: "a ghost beam, saturation or clipping", 3: "saturation, clipping or a ghost beam"}
    return [
        f"the fringe is no cosine: harmonic {order} of its law is {abs(share):.1%} "
        f"(u = {u:.1%}); likely causes: {causes[order]}"
        for order, share, u in zip((2, 3), shape.tolist(), shape_u.tolist(), strict=False)
        if abs(share) - 3.0 * u > 0.01
    ]


def fit_scan(values: NDArray[np.float64], rate_hz: float) -> ScanFit:
    """Fit the extremes of the fringe from a scan over whole fringes.

    Parameters
    ----------
    values : ndarray, shape (n,)
        Photodiode record, volts or counts; NaN where samples are missing.
    rate_hz : float
        Sample rate [Hz]; finite and > 0.

    Returns
    -------
    ScanFit
        Extremes at the middle of the scan with their covariance.

    Raises
    ------
    CalibrationError
        If there are fewer than 40 samples, or the record does not change.
    """
    values = np.asarray(values, dtype=float)
    if not (math.isfinite(rate_hz) and rate_hz > 0.0):
        raise CalibrationError(f"rate_hz must be finite and > 0 Hz, got {rate_hz}")
    good = np.isfinite(values)
    if good.sum() < _MIN_SAMPLES:
        raise CalibrationError(f"a scan needs {_MIN_SAMPLES} samples, got {int(good.sum())}")
    if np.ptp(values[good]) <= 0.0:
        raise CalibrationError(f"the scan does not change: every sample is {values[good][0]}")
    step = _converter_step(values[good])
    raw_noise = record_noise(values)
    # steps wider than the noise do not average out: then the edges are fitted step by step
    length = smoothing_length(values) if step < 1.5 * raw_noise else 1
    smoothed = smooth(values, length)
    used = np.flatnonzero(np.isfinite(smoothed))
    noise = max(raw_noise, 0.3 * step) * math.sqrt(noise_gain(length))
    clipped = _clipped(values[good], step)
    if length > 1:
        step = 0.0  # averages fall between the converter's steps
    fit = _fit(smoothed[used], used / len(values) - 0.5, noise, step, 1.0 / noise_gain(length))
    return replace(fit, reasons=clipped + fit.reasons)


def _fit(
    values: NDArray[np.float64],
    when: NDArray[np.float64],
    noise: float,
    step: float,
    together: float,
) -> ScanFit:
    """Fit the extremes, and once more with a slow change of the power taken out."""
    noise = max(noise, 1e-6 * float(np.ptp(values)))
    drift, level = np.zeros(2), values
    lower, upper, passes = _edges(values, noise, step)
    for _ in range(2):
        middles = np.bincount(passes, weights=when) / np.maximum(np.bincount(passes), 1)
        trends = [_trend(lower, middles), _trend(upper, middles)]
        limit = 0.2 * (lower.value + upper.value)
        if not any(limit > abs(slope) > 3.5 * u for slope, u in trends):
            break
        low, high = -lower.value, upper.value
        moved = drift + np.array([-trends[0][0], trends[1][0]])
        span = high - low + (moved[1] - moved[0]) * when
        if float(span.min()) < 0.3 * (
            high - low
        ):  # no straight drift: the amplitude comes and goes
            break
        trial = low + (high - low) * (values - low - moved[0] * when) / span
        edges = _edges(trial, noise, 0.0)
        if -edges[0].value >= edges[1].value:
            break
        drift, level, (lower, upper, passes) = moved, trial, edges
    low, high = -lower.value, upper.value
    reasons = _reasons(lower, upper, low, high, noise)
    shape, shape_u = (
        (np.zeros(0), np.zeros(0)) if reasons else law_harmonics(level, passes, low, high)
    )
    var_low, dof_low = _variance(lower, together)
    var_high, dof_high = _variance(upper, together)
    total = var_low + var_high
    dof = total**2 / (var_low**2 / dof_low + var_high**2 / dof_high)
    return ScanFit(
        low,
        high,
        np.diag([var_low, var_high]),
        dof,
        shape,
        shape_u,
        (int(np.sum(_seen(lower))), int(np.sum(_seen(upper)))),
        (float(drift[0]), float(drift[1])),
        reasons + _law_reasons(shape, shape_u),
    )
