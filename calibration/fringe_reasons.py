"""Reasons not to trust a driven fringe's fit."""

import math

import numpy as np
from numpy.typing import NDArray

from calibration.descent import Prior
from calibration.fringe_change import change_reasons
from calibration.fringe_search import Found
from calibration.scan import clipping

__all__ = ["fringe_reasons"]

_HARMONICS = 8
_NOT_DETERMINED = (
    "depth not determined by this record: below about 1 rad it cannot be told from the contrast while "
    "the working point stays (it moved by {moved:.2g} rad); give the extremes (--low and --high, or "
    "--extremes a scan)"
)
_NO_FRINGE = (
    "depth not determined by this record: what the fit leaves is as large as the fringe it takes; the "
    "line may be too weak to tell depth from contrast: give the extremes (--low and --high, or --extremes "
    "a scan)"
)
_AT_EXTREME = (
    "the working point sits at a fringe {where} (phase {phase:.2f} rad): there a line moves the light "
    "only at twice its frequency"
)


def _leftover(found: Found) -> tuple[float, int, int]:
    """Return the largest line left in the residual over the half span, its line and harmonic."""
    model, theta = found.model, found.theta
    orders = [
        (line, k)
        for line, turn in enumerate(model.turns.tolist())
        for k in range(1, _HARMONICS + 1)
        if k * turn < 0.98 * math.pi
    ]
    turns = np.array([k * model.turns[line] for line, k in orders])
    sums, count = np.zeros(len(turns), dtype=np.complex128), 0
    power = 0.0
    for start, stop in model.chunks():
        rest = model.residual(theta, start, stop)
        good = np.isfinite(rest)
        time = model.index[start:stop][good] - model.centre
        sums += rest[good] @ np.exp(-1j * np.outer(time, turns))
        count += int(good.sum())
        power += float(rest[good] @ rest[good])
    size = np.abs(sums) * 2.0 / count
    worst = int(np.argmax(size))
    chance = 6.0 * math.sqrt(2.0 * power / count / count)  # of white noise alone
    share = float(size[worst]) / abs(float(theta[1]))
    return (share if size[worst] > chance else 0.0), *orders[worst]


def _undetermined(
    prior: Prior | None, depths: list[tuple[float, float]], drift_rad: float
) -> list[str]:
    """Return why a depth is not determined."""
    deepest = max(depth + 3.0 * u for depth, u in depths)  # what may be 1 rad is not refused
    # with extremes known, or swept over, a small line is a weak one and no more
    worst = 0.1 if prior is None and drift_rad < 2.5 else 0.3
    if prior is None and deepest < 1.0 and drift_rad < 2.5:
        return [_NOT_DETERMINED.format(moved=drift_rad)]
    out = []
    for number, (depth, u) in enumerate(depths, start=1):
        if not u < worst * depth:
            out.append(
                f"depth not determined by this record: line {number} is {depth:.3g} rad with a "
                f"standard uncertainty of {u:.2g} rad"
            )
    return out


def _doubling(found: Found, values: NDArray[np.float64]) -> float:
    """Return the greatest ratio of a line's second harmonic to its first in the record itself.

    Harmonics beyond half the rate or on another line, and second harmonics within the noise, are
    left out.
    """
    model = found.model
    good = np.isfinite(values)
    time = np.flatnonzero(good) - model.centre
    bare = values[good] - values[good].mean()
    chance = 8.0 * math.sqrt(found.squares) / len(bare)
    width = 4.0 * math.pi / len(values)
    ratios = [0.0]
    for turn in model.turns.tolist():
        if 2.0 * turn > 0.98 * math.pi or np.min(np.abs(model.turns - 2.0 * turn)) < width:
            continue
        first, second = (
            np.abs(bare @ np.exp(-1j * np.outer(time, [turn, 2.0 * turn]))) * 2.0 / len(bare)
        )
        if second > chance:
            ratios.append(float(second / max(first, chance)))
    return max(ratios)


def _place(
    found: Found, deepest: float, phase: NDArray[np.float64], values: NDArray[np.float64]
) -> list[str]:
    """Return why the working point must not be trusted."""
    if deepest >= 0.9:
        return []
    flat = float(np.quantile(np.abs(np.sin(phase)), 0.9)) < 0.3
    if flat or (np.ptp(phase) < 1.0 and _doubling(found, values) > 0.5):
        where = "top" if float(np.mean(np.cos(phase))) > 0.0 else "bottom"
        return [_AT_EXTREME.format(where=where, phase=float(np.mean(phase)))]
    return []


def fringe_reasons(
    found: Found,
    prior: Prior | None,
    depths: list[tuple[float, float]],
    rival_rad: float | None,
    values: NDArray[np.float64],
) -> list[str]:
    """Return why a fit must not be trusted.

    Parameters
    ----------
    found : Found
        Finished fit.
    prior : Prior or None
        What was known of the extremes.
    depths : list of tuple
        (depth, standard uncertainty) of each line [rad].
    rival_rad : float or None
        Another depth of the first line that fits as well [rad].
    values : ndarray, shape (n,)
        The record.

    Returns
    -------
    list of str
        One line each; empty where nothing was found.
    """
    model, theta = found.model, found.theta
    half_span = abs(float(theta[1]))
    phase = model.drift(theta, np.linspace(0.0, 1.0, 201))
    drift_rad = float(np.ptp(phase))
    deepest = max(depth for depth, _ in depths)
    reasons = _undetermined(prior, depths, drift_rad) + _place(found, deepest, phase, values)
    apart = rival_rad is not None and abs(rival_rad - depths[0][0]) > 5.0 * depths[0][1]
    if apart and not reasons:
        reasons.append(f"two depths fit alike: {depths[0][0]:.4g} rad and {rival_rad:.4g} rad")
    periods = float(model.turns.min()) * np.count_nonzero(np.isfinite(values)) / (2.0 * math.pi)
    if periods < 3.0:
        reasons.append(
            f"too short: {periods:.2g} periods of the lowest line, at least 3 are needed"
        )
    fastest = sum(d * t for (d, _), t in zip(depths, model.turns.tolist(), strict=True))
    if fastest > 0.9 * math.pi:
        reasons.append(
            f"sampled too slowly: the phase turns by up to {fastest:.2g} rad a sample, π is the limit"
        )
    misfit = _misfit(found, prior, half_span, values)
    poor = math.sqrt(found.squares / np.count_nonzero(np.isfinite(values))) > 0.35 * half_span
    if prior is None and poor and not any("not determined" in one for one in reasons):
        reasons.insert(0, _NO_FRINGE)
    return reasons + clipping(values) + misfit + change_reasons(found)


def _misfit(
    found: Found, prior: Prior | None, half_span: float, values: NDArray[np.float64]
) -> list[str]:
    """Return where data and model, or data and given extremes, disagree."""
    reasons = []
    theta = found.theta
    count = np.count_nonzero(np.isfinite(values))
    rms = math.sqrt(found.squares / count)
    if rms > 0.35 * half_span:
        reasons.append(
            f"the model does not describe the record: residuals of {rms:.3g} rms against a half "
            f"span of {half_span:.3g}"
        )
    share, line, order = _leftover(found)
    if share > 0.02:
        reasons.append(
            f"residuals are not noise: harmonic {order} of line {line + 1} is left with "
            f"{share:.1%} of the half span"
        )
    if prior is not None and not prior.fixed:
        miss = theta[:2] - prior.value
        if float(miss @ prior.information @ miss) > 20.0:
            reasons.append(
                f"the given extremes disagree with the record, which has low {theta[0] - theta[1]:.5g} "
                f"and high {theta[0] + theta[1]:.5g}"
            )
    beyond = np.abs(values - theta[0]) > half_span + 4.0 * rms
    part = float(np.count_nonzero(beyond)) / count
    if part > 0.005:
        reasons.append(f"{part:.1%} of the samples lie beyond the extremes")
    return reasons
