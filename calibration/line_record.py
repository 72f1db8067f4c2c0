"""Line record: the passes over a recording that settle how its lines are summed.

A first look finds offsets and tones; one pass gives the block phasors; where the noise is not white, a
second gives those of the whitened samples. Free frequencies renew the carriers until they stand still.
"""

from dataclasses import replace

import numpy as np
from numpy.typing import NDArray

from calibration.channel_fit import fit_channel
from calibration.clock import combine_steps, follow_phases
from calibration.line_phasors import LinePhasors, sum_lines
from calibration.line_plan import LinePlan, new_course
from calibration.line_source import LineSource
from calibration.phase_course import PhaseCourse
from calibration.phasors import block_length
from calibration.survey import (
    SURVEYED,
    Survey,
    coarse_offset,
    look,
    nearest_peaks,
    strong_tones,
)
from calibration.whitening import choose_taps

__all__ = ["settle_lines"]

_FREE_ROUNDS = 20
_FREE_STEP = 1e-11


def settle_lines(
    source: LineSource,
    named_hz: NDArray[np.float64],
    *,
    free: bool = False,
    order: int = 2,
    mains_hz: float = 50.0,
    units: tuple[str, str] = ("1", "1"),
) -> LinePhasors:
    """Return the sums of a recording, by the plan that its own data ask for.

    Parameters
    ----------
    source : LineSource
        The recording.
    named_hz : ndarray, shape (n_lines,)
        Lines as they are named [Hz].
    free : bool
        Whether each has a frequency of its own to be found.
    order : int
        Degree of the phase that the clock is followed with otherwise; 0 for not at all.
    mains_hz : float
        Frequency of the mains [Hz].
    units : tuple of str
        Coherent SI units of the samples and the drive.

    Returns
    -------
    LinePhasors
        Its ``plan`` serves for parts of the recording too.
    """
    surveys = tuple(look(channel) for channel in source.channels())
    seen = [survey for survey in surveys if survey]
    cycles, offset = named_hz / source.rate_hz, 0.0
    if free:
        cycles = nearest_peaks(seen, cycles)
    elif order:
        offset = coarse_offset(seen, cycles, mains_hz / source.rate_hz)
        cycles = cycles * (1 + offset)
    plan = LinePlan(
        source.rate_hz,
        named_hz,
        cycles,
        offset,
        free,
        order,
        tuple(_tones(survey, cycles, source.length) for survey in surveys),
        ((1.0,),) * source.width,
        block_length(source.length),
        source.start,
        source.length,
        mains_hz,
        units,
        surveys,
        new_course(cycles, source.start, source.length, source.rate_hz, None if free else order),
    )
    return _free_lines(source, plan) if free else _given_lines(source, plan)


def _tones(survey: Survey | None, cycles: NDArray[np.float64], samples: int) -> NDArray[np.float64]:
    return strong_tones(survey, cycles, samples)


def _taps(source: LineSource, plan: LinePlan, course: PhaseCourse) -> tuple[tuple[float, ...], ...]:
    """Return the whitening filter of each channel, lines and tones taken out first."""
    return tuple(
        choose_taps(channel, plan.cycles, course, tones)
        for channel, tones in zip(source.channels(), plan.tones, strict=True)
    )


def _given_lines(source: LineSource, plan: LinePlan) -> LinePhasors:
    """Sum lines at given frequencies, their common clock followed."""
    sums = sum_lines(source, plan).checked()
    stretch = float(min(source.length, SURVEYED))
    followed = follow_phases(sums.blocks, len(plan.cycles), plan.course, stretch)
    taps = _taps(source, plan, followed.applied)
    plan = replace(plan, taps=taps, course=followed.course)
    return sum_lines(source, plan) if plan.reach else replace(sums, plan=plan)


def _free_lines(source: LineSource, plan: LinePlan) -> LinePhasors:
    """Sum lines with frequencies of their own, at first in the noise as it is."""
    sums = _free_rounds(source, plan)
    plan = replace(sums.plan, taps=_taps(source, sums.plan, sums.plan.course))
    return _free_rounds(source, plan) if plan.reach else sums


def _free_rounds(source: LineSource, plan: LinePlan) -> LinePhasors:
    """Gauss–Newton in the frequencies, the carriers renewed in each round."""
    sums = sum_lines(source, plan).checked()
    for _ in range(_FREE_ROUNDS):
        fits = [fit_channel(phasors, len(plan.cycles), plan.course) for phasors in sums.blocks]
        step, _ = combine_steps(fits)
        # Steps of 1e-11 cycles over the record turn no phase by more than 1e-10 rad.
        if (np.abs(step) * source.length / source.rate_hz < _FREE_STEP).all():
            break
        cycles = np.clip(plan.cycles + step / source.rate_hz, 1e-9, 0.5 - 1e-9)
        plan = replace(plan, cycles=cycles)
        sums = sum_lines(source, plan)
    return sums
