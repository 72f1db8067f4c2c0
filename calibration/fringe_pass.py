"""Passes of a swept mirror: the stretches in which it went one way, with their fringes."""

import math
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from calibration.half_fringes import half_fringe_samples, slow_spots
from calibration.turning_points import turning_points
from calibration.unfolding import Unfolded

__all__ = ["Pass", "cut_passes", "end_u"]

FloatArray = NDArray[np.float64]

_TURN_BAND_RAD = math.pi  # a way back of less than half a fringe is vibration, not a new pass
_END_BAND_RAD = 1.0  # nor is a shorter one at an end of the record
_HIDDEN = 0.16  # fringes: 28° there and back
_LEAST_SHORT = 0.005  # of half the span: 6° of phase
_SEEN = 7.0  # standard deviations of the noise by which a dip stands out
_LAW_U = 0.005  # fringes: what a harmonic of 3 % in the law moves the phase by


@dataclass(frozen=True)
class Pass:
    """A stretch in which the mirror went one way.

    Attributes
    ----------
    start_index, stop_index : int
        Samples of the record, the last one included.
    fringes : float
        Fringes gone through, > 0.
    fringes_u : float
        Standard uncertainty.
    direction : int
        1 where the drive rises, −1 where it falls, 0 where unknown or against the drive.
    fastest : float
        Fringes per sample where it went fastest.
    """

    start_index: int
    stop_index: int
    fringes: float
    fringes_u: float
    direction: int
    fastest: float


def end_u(got: Unfolded, places: NDArray[np.int64]) -> FloatArray:
    """Return the standard uncertainty of the phase at some samples.

    Parameters
    ----------
    got : Unfolded
        Phase and turns.
    places : ndarray of int, shape (k,)
        Samples, the first and the last among them.

    Returns
    -------
    ndarray, shape (k,)
        In fringes.
    """
    angle = np.abs(np.sin(got.phase_rad[places]))
    step = _steps(got)[places]
    # the extremes, too, are known to about 1 %, less well where they lie between samples
    # the tops pick the most of what lies on top: elsewhere it is about twice their scatter
    cosine_u = np.hypot(math.hypot(got.cosine_u, 2.0 * got.uneven), 0.01 + 0.03 * step / math.pi)
    near = np.minimum(cosine_u / np.maximum(angle, 1e-9), np.sqrt(2.0 * cosine_u))
    # within the band of an extreme the side is not known, nor where the extreme may lie between samples
    hidden = math.acos(max(1.0 - 2.0 * got.band, -1.0)) + 0.75 * step
    folded = np.arcsin(np.minimum(angle, 1.0))
    near = np.where(folded < hidden, np.hypot(near, 1.2 * folded), near)
    out = np.hypot(near / (2.0 * math.pi), _LAW_U)
    out[[0, -1]] = np.hypot(out[[0, -1]], _touched(got))
    return np.asarray(out)


def _touched(got: Unfolded) -> FloatArray:
    """Return what is not known of both ends where the extreme next to one is left on the side it was met.

    The mirror shook over it and back: whether the end lies before or beyond it, the record does not tell.
    """
    places = got.turns[got.passed]
    out = np.zeros(2)
    for k, (end, near, next_one) in enumerate(((0, 0, 1), (-1, -1, -2))):
        if len(places) > 1 and np.prod(np.cos(got.phase_rad[places[[near, next_one]]])) > 0.0:
            out[k] = abs(got.phase_rad[end] - got.phase_rad[places[near]]) / (2.0 * math.pi)
    return out


def _steps(got: Unfolded) -> FloatArray:
    """Return the phase step about each sample [rad], over several half fringes."""
    count = len(got.phase_rad)
    if len(got.swings) < 3:
        return np.zeros(count)
    return math.pi / half_fringe_samples(got.swings, np.arange(count), count)


def _low_tops(got: Unfolded) -> tuple[NDArray[np.int64], FloatArray]:
    """Return the tops and bottoms that lie short of the others, and by how many fringes.

    One that is taken for going over the extreme may be a turn of the mirror next to it.
    """
    turns = got.turns[got.passed]
    short = 1.0 - np.abs(np.cos(got.phase_rad[turns]))
    if len(turns) < 4:
        return turns[:0], short[:0]
    usual = float(np.median(short))
    scatter = 1.4826 * float(np.median(np.abs(short - usual)))
    missed = 1.0 - np.cos(0.5 * _steps(got)[turns])
    low = short > usual + 5.0 * scatter + 3.0 * got.cosine_u + missed + _LEAST_SHORT
    return turns[low], np.arccos(1.0 - short[low]) / (2.0 * math.pi)


def _dips(got: Unfolded) -> tuple[NDArray[np.int64], FloatArray]:
    """Return where the level leaves an extreme and comes back, and by how many fringes it went.

    Vibration makes such a dip, and so does a mirror that turns a little way beyond the extreme.
    """
    level = np.cos(got.phase_rad)
    turns = turning_points(level, _seen(got))
    kind = np.sign(np.diff(level[turns], prepend=level[0]))  # 1: a maximum
    shallow = 1.0 - np.abs(level[turns])
    dips = (kind * level[turns] < 0.0) & (shallow < 2.0 * got.band)
    return turns[dips], np.arccos(1.0 - shallow[dips]) / (2.0 * math.pi)


def _shaken(got: Unfolded, turns: NDArray[np.int64]) -> FloatArray:
    """Return what is not known of turns of a mirror that shakes next to an extreme, in fringes.

    Where the level comes close to it more than once, each time may have gone over it or not.
    """
    places = got.turns[got.passed]
    off = np.arccos(np.abs(np.cos(got.phase_rad[places])))
    out = np.zeros(len(turns))
    if len(got.swings) < 3:
        return out
    after = np.clip(np.searchsorted(got.swings, turns), 1, len(got.swings) - 1)
    first = np.searchsorted(places, got.swings[after - 1])
    stop = np.searchsorted(places, got.swings[after], side="right")
    for k, (a, b) in enumerate(zip(first.tolist(), stop.tolist(), strict=True)):
        kind = np.cos(got.phase_rad[places[a:b]]) > 0.0
        for side in (kind, ~kind):
            if np.count_nonzero(side) > 1:
                out[k] = max(out[k], float(off[a:b][side].max()) / (1.7 * math.pi))
    return out


def _seen(got: Unfolded) -> float:
    """Return the least change of cos φ that stands out of the noise."""
    return max(_SEEN * got.cosine_u, _LEAST_SHORT)


def _unseen(got: Unfolded, start: int, stop: int, spots: NDArray[np.int64]) -> float:
    """Return what turns that were taken for going over an extreme may have done to a pass.

    A turn that far before or beyond an extreme changes the fringes by twice its distance, U by as much.
    """
    # a dip or a shortfall that the noise, or the time between two samples, hides
    step = float(np.max(_steps(got)[start : stop + 1]))
    always = (math.acos(max(1.0 - _seen(got), -1.0)) + 0.5 * step) / (2.0 * math.pi)
    each = [(spots, np.full(len(spots), _HIDDEN)), _low_tops(got), _dips(got)]
    slow, low, dip = (math.fsum(sizes[(at > start) & (at < stop)]) for at, sizes in each)
    return max(min(always, _HIDDEN), slow, low + dip)


def cut_passes(got: Unfolded, first: int, drive: FloatArray | None) -> list[Pass]:
    """Cut the phase where the mirror turned.

    Parameters
    ----------
    got : Unfolded
        Phase and turns.
    first : int
        Number of the first sample in the record it came from.
    drive : ndarray, shape (n,), or None
        What moves the mirror, beside the phase.

    Returns
    -------
    list of Pass
        In order.
    """
    phase = got.phase_rad
    turns = turning_points(phase, _TURN_BAND_RAD)
    while len(turns) and abs(phase[turns[0]] - phase[0]) < _END_BAND_RAD:
        turns = turns[1:]
    while len(turns) and abs(phase[turns[-1]] - phase[-1]) < _END_BAND_RAD:
        turns = turns[:-1]
    ends = np.concatenate([[0], turns, [len(phase) - 1]])
    u = end_u(got, ends)
    # where the mirror turns next to an extreme, the way beyond the extreme may be taken for one back
    hidden = math.acos(1.0 - min(2.0 * got.band, 1.0)) / (2.0 * math.pi)
    if drive is None:  # then a turn that far from an extreme is taken for going over it
        hidden = max(hidden, _HIDDEN)
    unseen = np.maximum(hidden, 0.5 * _steps(got)[turns] / (2.0 * math.pi))
    u[1:-1] = np.hypot(u[1:-1], np.maximum(unseen, _shaken(got, turns)))
    spots = slow_spots(got.swings, len(phase))
    out = []
    for k in range(len(ends) - 1):
        start, stop = int(ends[k]), int(ends[k + 1])
        pass_u = math.hypot(u[k], u[k + 1])
        if drive is None:  # what hides next to an extreme hides at both ends alike
            pass_u = float(u[k] + u[k + 1]) + _unseen(got, start, stop, spots)
        way = float(phase[stop] - phase[start])
        direction = 0 if drive is None else int(np.sign(way))
        if drive is not None and direction * (drive[stop] - drive[start]) < 0.0:
            direction = 0  # the mirror went against the drive, which then does not tell
        out.append(
            Pass(
                start + first,
                stop + first,
                abs(way) / (2.0 * math.pi),
                pass_u,
                direction,
                _fastest_of(got, start, stop),
            )
        )
    return out


def _fastest_of(got: Unfolded, start: int, stop: int) -> float:
    """Return the greatest fringes per sample between two samples, over four half fringes each."""
    turns = got.swings[(got.swings >= start) & (got.swings <= stop)]
    if len(turns) < 2:
        span = abs(float(got.phase_rad[stop] - got.phase_rad[start])) / (2.0 * math.pi)
        return span / max(stop - start, 1)
    over = min(4, len(turns) - 1)
    return float(np.max(0.5 * over / (turns[over:] - turns[:-over])))
