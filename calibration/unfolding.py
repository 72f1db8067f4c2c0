"""Unfolding: from a swept photodiode record to the phase it went through.

Between two extremes of the fringe the phase is arccos of the level; each time the record goes over
an extreme it carries on. Where the record turns back short of an extreme, the mirror itself turned.
"""

import math
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from calibration.envelope import Envelope, running_median
from calibration.smoother import noise_std
from calibration.turning_points import turning_points

__all__ = ["Unfolded", "drive_turns", "slow_spots", "unfold_fringe"]

FloatArray = NDArray[np.float64]

_LEAST_BAND = 0.1  # of the span: vibration of up to 0.6 rad makes no turn next to an extreme
_LEAST_DRIVEN_BAND = 0.005  # the drive, not the band, tells vibration from a turn
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
    """

    phase_rad: FloatArray
    turns: NDArray[np.int64]
    passed: NDArray[np.bool_]
    band: float
    cosine_u: float
    against_drive: float
    unfollowed: tuple[int, int]


def _passed(cosine: FloatArray, turns: NDArray[np.int64], cosine_u: float) -> NDArray[np.bool_]:
    """Return which turns lie at an extreme, allowing for noise and for samples that miss the top."""
    if not len(turns):
        return np.zeros(0, dtype=bool)
    # a sample is up to half a step of π/samples off the top; a lone quick jerk is no quick fringe
    samples = np.maximum(running_median(np.diff(turns, append=len(cosine)).astype(float), 7), 1.0)
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


def slow_spots(turns: NDArray[np.int64], count: int) -> NDArray[np.int64]:
    """Return the turns about which the fringes go by far more slowly than before and after.

    Parameters
    ----------
    turns : ndarray of int, shape (k,)
        Samples at which a record turns.
    count : int
        Samples of the record.

    Returns
    -------
    ndarray of int
        Samples; the mirror may have turned there unseen.
    """
    legs = np.diff(np.concatenate([[0], turns, [count - 1]])).astype(float)
    if len(legs) < 9:
        return np.zeros(0, dtype=np.int64)
    return np.asarray(turns[legs[:-1] + legs[1:] > 3.0 * running_median(legs, 9)[:-1]])


def drive_turns(drive: FloatArray) -> NDArray[np.int64]:
    """Return where a drive turns, noise and small steps left out.

    Parameters
    ----------
    drive : ndarray, shape (n,)
        What moves the mirror, any unit.

    Returns
    -------
    ndarray of int, shape (k,)
        Samples.
    """
    band = max(0.01 * float(np.ptp(drive)), 7.0 * noise_std(drive)) + 1e-12
    return turning_points(drive, band)


def _unfollowed(
    drive: FloatArray | None, turns: NDArray[np.int64], cosine: FloatArray
) -> tuple[int, int]:
    """Return how many turns of the drive lie well within a leg, and how many could be seen there.

    Next to an extreme a turn of the mirror may not show; those are left out.
    """
    if drive is None or len(turns) < 2:
        return 0, 0
    driven = drive_turns(drive)
    driven = driven[np.abs(cosine[driven]) < 0.6]
    after = np.clip(np.searchsorted(turns, driven), 1, len(turns) - 1)
    leg = turns[after] - turns[after - 1]
    off = np.minimum(np.abs(turns[after] - driven), np.abs(driven - turns[after - 1]))
    return int(np.count_nonzero(off > 0.3 * leg)), len(driven)


def _driven_sides(ends: NDArray[np.int64], angle: FloatArray, drive: FloatArray) -> FloatArray:
    """Return the side of each leg as the drive has it, from −1 to 1; 0 where it does not move.

    A leg in which the drive itself turns counts by where most of the angle was gone through.
    """
    span = float(np.ptp(drive))
    turns = drive_turns(drive)
    ways = np.sign(np.diff(drive[np.concatenate([[0], turns, [len(drive) - 1]])]))
    way = ways[np.searchsorted(turns, np.arange(len(drive) - 1), side="right")]
    if span <= 0.0:
        way = np.zeros(len(drive) - 1)
    moved = np.concatenate([[0.0], np.cumsum(way * np.diff(angle))])
    travel = np.concatenate([[0.0], np.cumsum(np.abs(np.diff(angle)))])
    return np.asarray(np.diff(moved[ends]) / np.maximum(np.diff(travel[ends]), 1e-12))


def _hidden_turns(ends: NDArray[np.int64]) -> NDArray[np.bool_]:
    """Return at which turns the fringes all but stop: there the mirror turned at an extreme."""
    legs = np.diff(ends).astype(float)
    if len(legs) < 9:
        return np.zeros(len(legs) - 1, dtype=bool)
    return np.asarray(legs[:-1] + legs[1:] > 6.0 * running_median(legs, 9)[:-1])


def _sides(
    angle: FloatArray, ends: NDArray[np.int64], passed: NDArray[np.bool_], drive: FloatArray | None
) -> tuple[FloatArray, float]:
    """Return the side of each leg, s in φ = 2πj + s·a, and the share of travel against the drive."""
    change = np.diff(angle[ends])
    slopes = np.where(change < 0.0, -1.0, 1.0)
    if drive is None:
        flips = np.where(passed & ~_hidden_turns(ends), -1.0, 1.0)
        return slopes[0] * np.concatenate([[1.0], np.cumprod(flips)]), 0.0
    driven = _driven_sides(ends, angle, drive)
    side = np.empty(len(slopes))
    # until the first extreme all legs lie on one side: most of the way goes with the drive
    begin = int(np.argmax(passed)) + 1 if passed.any() else len(slopes)
    side[0] = np.sign(np.sum((driven * np.abs(change))[:begin])) or slopes[0]
    for k in range(1, len(side)):
        clear = abs(driven[k]) > 0.2
        side[k] = side[k - 1]
        if passed[k - 1]:
            side[k] = np.sign(driven[k]) if clear else -side[k - 1]
    against = np.where(driven * side < -0.2, np.abs(change), 0.0)
    return side, float(against.sum() / max(np.abs(change).sum(), 1e-12))


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
    passed = _passed(cosine, turns, cosine_u)
    side, against = _sides(angle, ends, passed, drive)
    # over a bottom, φ = 2πj + sπ, the next leg hangs on 2π(j + s) where the side changes
    bottom = (cosine[turns] < 0.0) & (side[1:] != side[:-1])
    whole = np.concatenate([[0.0], np.cumsum(np.where(bottom, side[:-1], 0.0))])
    leg = np.searchsorted(turns, np.arange(len(cosine)), side="left")
    phase = 2.0 * math.pi * whole[leg] + side[leg] * angle
    return Unfolded(
        phase, turns, passed, band / 2.0, cosine_u, against, _unfollowed(drive, turns, cosine)
    )
