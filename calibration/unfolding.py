"""Unfolding: from a swept photodiode record to the phase it went through.

Between two extremes of the fringe the phase is arccos of the level; each time the record goes over
an extreme it carries on. Where the record turns back short of an extreme, the mirror itself turned.
"""

import math
from dataclasses import dataclass, field

import numpy as np
from numpy.typing import NDArray

from calibration.driven_way import against_drive, driven_sides, unfollowed_turns
from calibration.envelope import Envelope
from calibration.half_fringes import half_fringe_samples, slow_spots, whole_swings
from calibration.swept_record import averaged
from calibration.turning_points import turning_points

__all__ = ["Unfolded", "unfold_fringe"]

FloatArray = NDArray[np.float64]

_LEAST_BAND = 0.1  # of the span: vibration of up to 0.6 rad makes no turn next to an extreme
_LEAST_DRIVEN_BAND = 0.005  # the drive, not the band, tells vibration from a turn
_LITTLE = 0.5  # rad
_NEAR_END = 0.95  # of cos φ
_UP_TO = 0.15  # rad: what an extreme known to 1 % leaves open
_SHORT = 0.12  # a top this much below the extreme still counts as gone over: 28° of phase


@dataclass(frozen=True)
class Unfolded:
    """Phase of a record, carried on over the extremes of the fringe.

    Attributes
    ----------
    phase_rad : ndarray, shape (n,)
        Phase [rad]: φ = 0 at a maximum of the fringe; grows with the drive where there is one, else
        from the first sample on.
    turns : ndarray of int, shape (k,)
        Samples at which the record turns by more than the band.
    passed : ndarray of bool, shape (k,)
        Which of them go over an extreme of the fringe; at the others the mirror turned.
    band : float
        Hysteresis of a turn, as a fraction of the fringe's span.
    cosine_u : float
        Standard uncertainty of cos φ at one sample.
    against_drive : float
        Share of the travel that went against the drive; 0 without a drive.
    unfollowed : tuple of int
        Turns of the drive away from the extremes at which the record goes straight on, and how many
        turns lie there.
    swings : ndarray of int
        Those turns that end a swing over most of the fringe; all where these are too few.
    uneven : float
        How much the tops and bottoms of whole fringes scatter, in cos φ, beyond noise and sampling.
    """

    phase_rad: FloatArray
    turns: NDArray[np.int64]
    passed: NDArray[np.bool_]
    band: float
    cosine_u: float
    against_drive: float
    unfollowed: tuple[int, int]
    swings: NDArray[np.int64] = field(default_factory=lambda: np.zeros(0, dtype=np.int64))
    uneven: float = 0.0


def _uneven(cosine: FloatArray, swings: NDArray[np.int64], cosine_u: float) -> float:
    """Return the scatter of tops and bottoms with whole half fringes on both sides."""
    level = cosine[swings]
    swing = np.abs(np.diff(level))
    whole = np.flatnonzero(np.minimum(swing[1:], swing[:-1]) > 1.2) + 1
    samples = half_fringe_samples(swings, swings, len(cosine))
    scatters = []
    for side in (level > 0.0, level <= 0.0):
        own = whole[side[whole]]
        if len(own) < 5:
            return 0.0
        missed = 1.0 - np.cos(0.5 * np.pi / samples[own])
        about = np.abs(level[own] - np.median(level[own]))
        scatter = 1.4826 * float(np.median(about))
        scatters.append(scatter**2 - (0.35 * float(np.median(missed))) ** 2)
    return math.sqrt(max(max(scatters) - (1.5 * cosine_u) ** 2, 0.0))


def _ripple(cosine: FloatArray, swings: NDArray[np.int64], cosine_u: float) -> float:
    """Return what lies on top of the fringe, quicker than it, beyond noise.

    It is looked for at tops and bottoms, where vibration of the mirror moves the level little.
    """
    half = half_fringe_samples(swings, swings, len(cosine))
    length = 2 * int(float(np.quantile(half, 0.1)) / 6.0) + 1 if len(swings) > 2 else 1
    if length < 5:
        return 0.0
    rest = (cosine - averaged(cosine, length))[np.abs(cosine) > _NEAR_END]
    if len(rest) < 2 * length:
        return 0.0
    return math.sqrt(max(float(np.mean(rest**2)) - (1.3 * cosine_u) ** 2, 0.0))


def _passed(
    cosine: FloatArray, turns: NDArray[np.int64], swings: NDArray[np.int64], cosine_u: float
) -> NDArray[np.bool_]:
    """Return which turns lie at an extreme, allowing for noise and for samples that miss the top."""
    if not len(turns):
        return np.zeros(0, dtype=bool)
    # a sample is up to half a step of π/samples off the top; a lone quick jerk is no quick fringe
    samples = half_fringe_samples(swings, turns, len(cosine))
    missed = 1.0 - np.cos(np.minimum(0.5 * np.pi / samples, 0.5 * np.pi))
    # only a maximum can lie at the top, only a minimum at the bottom
    way = np.sign(np.diff(cosine[turns], prepend=cosine[0]))
    short = 1.0 - way * cosine[turns]
    # how much tops differ of themselves: uneven light; only where whole half fringes lie on both sides
    swing = np.abs(np.diff(cosine[turns]))
    whole = np.minimum(np.concatenate([swing, [0.0]]), np.concatenate([[0.0], swing])) > 1.4
    scatter = 0.0
    if np.count_nonzero(whole) >= 5:
        scatter = 1.4826 * float(np.median(np.abs(short[whole] - np.median(short[whole]))))
    allowed = min(max(_SHORT, 6.0 * scatter), 0.45)
    passed = short < allowed + 4.0 * cosine_u + missed
    return _one_of_each_group(passed, short, 0.05 + 2.5 * cosine_u + missed)


def _one_of_each_group(
    passed: NDArray[np.bool_], short: FloatArray, near: FloatArray
) -> NDArray[np.bool_]:
    """Return the same without tops that lie clearly below another of the same visit to the top.

    Two tops with no bottom between belong to one visit; where the mirror shakes, the lower one is a
    turn short of the extreme.
    """
    out = passed.copy()
    for k in np.flatnonzero(passed[:-2] & ~passed[1:-1] & passed[2:]).tolist():
        low, high = (k, k + 2) if short[k] > short[k + 2] else (k + 2, k)
        if short[low] > near[low] and short[low] > short[high] + 0.5 * near[high]:
            out[low] = False
    return out


def _hidden_turns(ends: NDArray[np.int64], swings: NDArray[np.int64]) -> NDArray[np.bool_]:
    """Return at which turns the fringes all but stop: there the mirror turned at an extreme."""
    return np.isin(ends[1:-1], slow_spots(swings, int(ends[-1]) + 1, 6.0))


def _sides(
    angle: FloatArray,
    ends: NDArray[np.int64],
    passed: NDArray[np.bool_],
    swings: NDArray[np.int64],
    drive: FloatArray | None,
) -> FloatArray:
    """Return the side of each leg, s in φ = 2πj + s·a."""
    change = np.diff(angle[ends])
    slopes = np.where(change < 0.0, -1.0, 1.0)
    if drive is None:
        flips = np.where(passed & ~_hidden_turns(ends, swings), -1.0, 1.0)
        return np.asarray(slopes[0] * np.concatenate([[1.0], np.cumprod(flips)]))
    # all legs from one extreme to the next lie on one side: vibration makes many of one
    own = np.concatenate([[0], np.cumsum(passed)])
    bounds = ends[np.concatenate([[0], np.flatnonzero(passed) + 1, [len(ends) - 1]])]
    driven = driven_sides(bounds, angle, drive)
    # where the drive does not tell, only what comes right up to the extreme goes over it
    off = np.abs(np.sin(angle[bounds[:-1]]))
    side = np.empty(len(driven))
    side[0] = np.sign(driven[0]) or slopes[0]
    for k in range(1, len(side)):
        onward = -side[k - 1] if off[k] < _UP_TO else side[k - 1]
        side[k] = np.sign(driven[k]) if abs(driven[k]) > 0.2 else onward
    # at an end of the record a little way back from a top that is none is vibration
    for end, next_one, top in ((0, 1, 1), (-1, -2, -1)):
        if len(side) < 2:
            break
        first, stop = bounds[end - (end < 0)], bounds[end + (end == 0)]
        step = np.pi / float(half_fringe_samples(swings, bounds[:-1][[top]], len(angle))[0])
        if off[top] > _UP_TO + step and np.ptp(angle[first : stop + 1]) < _LITTLE:
            side[end] = side[next_one]
    return np.asarray(side[own])


def unfold_fringe(
    values: FloatArray, envelope: Envelope, noise: float, drive: FloatArray | None = None
) -> Unfolded:
    """Return the phase that a swept record went through.

    Parameters
    ----------
    values : ndarray, shape (n,)
        Record, any unit, no NaN; smoothed where it is sampled finely.
    envelope : Envelope
        The fringe's extremes at each sample.
    noise : float
        Standard deviation of the noise of ``values``, same unit.
    drive : ndarray, shape (n,), optional
        What moves the mirror, any unit, averaged where it is noisy: its direction tells that of the
        phase.

    Returns
    -------
    Unfolded
        Phase and turns.
    """
    cosine = envelope.cosine(values)
    cosine_u = noise / float(np.median(envelope.half_span))
    least = _LEAST_BAND if drive is None else _LEAST_DRIVEN_BAND
    band = min(max(2.0 * least, 7.0 * cosine_u), 1.2)
    level = np.clip(cosine, -1.5, 1.5)
    turns = turning_points(level, band)
    # a turn that an end of the record does not stand clear of is noise as likely as not
    if len(turns) and abs(level[turns[0]] - level[0]) < band:
        turns = turns[1:]
    if len(turns) and abs(level[turns[-1]] - level[-1]) < band:
        turns = turns[:-1]
    angle = np.arccos(np.clip(cosine, -1.0, 1.0))
    ends = np.concatenate([[0], turns, [len(cosine) - 1]])
    swings = whole_swings(level, turns, band)
    passed = _passed(cosine, turns, swings, cosine_u)
    side = _sides(angle, ends, passed, swings, drive)
    # over a bottom, φ = 2πj + sπ, the next leg hangs on 2π(j + s) where the side changes
    bottom = (cosine[turns] < 0.0) & (side[1:] != side[:-1])
    whole = np.concatenate([[0.0], np.cumsum(np.where(bottom, side[:-1], 0.0))])
    leg = np.searchsorted(turns, np.arange(len(cosine)), side="left")
    phase = 2.0 * math.pi * whole[leg] + side[leg] * angle
    return Unfolded(
        phase,
        turns,
        passed,
        band / 2.0,
        cosine_u,
        against_drive(phase, drive),
        unfollowed_turns(drive, level, band),
        swings,
        max(_uneven(cosine, swings, cosine_u), _ripple(cosine, swings, cosine_u)),
    )
