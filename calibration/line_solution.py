"""Line solution: from the sums over a recording to its lines, the clock, and what to think of them."""

import numpy as np
from numpy.typing import NDArray

from calibration.channel_fit import fit_channel
from calibration.clock import Followed, follow_phases
from calibration.distrust import TOO_WEAK, Doubts, is_clipped
from calibration.line_course import beside_of, course_of
from calibration.line_fit import Line, LineFit
from calibration.line_phasors import LinePhasors
from calibration.line_plan import LinePlan
from calibration.line_result import FittedChannel, ratio_estimate
from calibration.survey import SURVEYED

__all__ = ["solve_lines"]

_LARGE_OFFSET = 1e-3  # a crystal is a hundred times better


def solve_lines(sums: LinePhasors) -> LineFit:
    """Return the lines of a recording.

    Parameters
    ----------
    sums : LinePhasors
        Over all of it.

    Returns
    -------
    LineFit
        Lines in the order of the plan.
    """
    sums = sums.joined()
    plan = sums.plan
    followed = _followed(sums)
    fitted = [_fitted(sums, k, followed) for k in range(plan.width)]
    doubts = _doubts(sums, fitted[0])
    lines = [_line(fitted, plan, doubts, k) for k in range(len(plan.cycles))]
    # Lines that are lost in noise say nothing about the clock.
    lost = all(any(r.startswith(TOO_WEAK) for r in line.distrust_reasons) for line in lines)
    clock, clock_u = (np.nan, np.nan) if plan.is_free or lost else _clock(plan, followed)
    return LineFit(
        tuple(lines),
        clock,
        clock_u,
        followed.dof,
        bool(followed.kept.any()) and not plan.is_free,
        float(sums.blocks[0].present.sum()) / sums.length,
        sums.length / plan.rate_hz,
        tuple(_remarks(plan)),
        notes=_notes(plan),
        clock_drift_per_s=_drift(sums, followed) if np.isfinite(clock) else None,
    )


def _drift(sums: LinePhasors, followed: Followed) -> tuple[float, float] | None:
    """Return the change of the relative offset in a second, and its u."""
    course = followed.course
    if 2 not in course.degrees:
        return None
    # θ·P₂(x), P₂' = 3x, x one in half a recording: the offset grows by 3θ in that time.
    at = course.degrees.index(2)
    scale = 3.0 * sums.plan.rate_hz / course.half * (1 + sums.plan.offset)
    u = float(np.sqrt(max(0.0, followed.covariance[at, at])))
    return float(course.theta[at]) * scale, u * scale


def _followed(sums: LinePhasors) -> Followed:
    plan = sums.plan
    course = plan.course_over(sums.start, sums.length)
    stretch = np.inf if plan.is_free else float(min(sums.length, SURVEYED))
    found = follow_phases(sums.blocks, len(plan.cycles), course, stretch)
    # An offset seen in the first look is followed, however small what is left of it.
    seen = np.array([degree == 1 for degree in course.degrees], dtype=bool)
    seen &= plan.is_free or plan.offset != 0
    return Followed(found.course, found.covariance, found.dof, found.kept | seen)


def _fitted(sums: LinePhasors, channel: int, followed: Followed) -> FittedChannel:
    plan, phasors = sums.plan, sums.blocks[channel]
    fit = fit_channel(phasors, len(plan.cycles), followed.applied, refine=False)
    functions = followed.course.at(phasors.middles)
    mean = (functions * phasors.counts[:, None]).sum(axis=1) / max(1, phasors.used)
    return FittedChannel(fit, followed, plan.cycles, plan.taps[channel], plan.units[channel], mean)


def _doubts(sums: LinePhasors, response: FittedChannel) -> Doubts:
    plan = sums.plan
    kept = [
        np.concatenate([part.kept[channel] for part in sums.parts]) for channel in range(plan.width)
    ]
    return Doubts(
        response.cycles * plan.rate_hz,
        plan.rate_hz,
        sums.length / plan.rate_hz,
        plan.mains_hz,
        list(plan.surveys),
        [is_clipped(values) for values in kept],
        [_largest(values) for values in kept],
    )


def _largest(values: NDArray[np.float64]) -> float:
    """Return the largest absolute value of those that were kept."""
    looked = np.abs(values.astype(np.float64))
    return float(looked.max(initial=0.0, where=np.isfinite(looked)))


def _line(fitted: list[FittedChannel], plan: LinePlan, doubts: Doubts, k: int) -> Line:
    response, rate_hz = fitted[0], plan.rate_hz
    frequency_hz, frequency_u_hz = float(plan.named_hz[k]), 0.0
    if plan.is_free:
        frequency_hz = float(plan.cycles[k] * rate_hz + response.followed.course.theta[k])
        frequency_u_hz = float(np.sqrt(max(0.0, response.followed.covariance[k, k])))
    return Line(
        frequency_hz,
        frequency_u_hz,
        response.estimate(k),
        response.density(k, rate_hz),
        response.fit.used / rate_hz,
        response.floor(k, rate_hz, doubts.largest[0]),
        fitted[1].estimate(k) if len(fitted) > 1 else None,
        ratio_estimate(response, fitted[1], k) if len(fitted) > 1 else None,
        doubts.reasons(fitted, k),
        course=course_of(response, k, plan),
        beside=beside_of(response, k, plan),
    )


def _remarks(plan: LinePlan) -> list[str]:
    remarks = []
    if abs(plan.offset) > _LARGE_OFFSET:
        remarks.append(
            f"the lines were followed {100 * plan.offset:+.2g} % from where they were named"
        )
        if len(plan.cycles) * plan.width == 1:
            remarks.append("one line alone cannot tell a clock that is off from another tone")
    return remarks


def _notes(plan: LinePlan) -> tuple[str, ...]:
    if not plan.reach:
        return ()
    return ("the noise is not white: samples and lines went through one short filter",)


def _clock(plan: LinePlan, followed: Followed) -> tuple[float, float]:
    """Return the mean relative frequency offset and its u."""
    # P_d(1) − P_d(−1) is 2 for odd degrees and 0 for even ones.
    odd = np.array([degree % 2 for degree in followed.course.degrees], dtype=np.float64)
    if not len(odd):
        return float("nan"), float("nan")
    left = float(odd @ followed.course.theta)
    u = float(np.sqrt(odd @ followed.covariance @ odd))
    return (1 + plan.offset) * (1 + left) - 1, (1 + plan.offset) * u
