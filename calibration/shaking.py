"""Shaking: vibration that turns a mirror more often than a scan does."""

import math

import numpy as np
from numpy.typing import NDArray

from calibration.driven_way import drive_turns
from calibration.fringe_pass import Pass
from calibration.standstill import standing_stretches
from calibration.unfolding import Unfolded

__all__ = ["kinks", "shaking_reasons"]

FloatArray = NDArray[np.float64]

_HALF_FRINGE = 0.8 * math.pi  # a way back of so much may hide one that goes over two extremes
_TOP = 0.85
_COARSE = 6.0  # samples a fringe below which a turn does not show as slower fringes
_WINDOW = 31  # samples over which the speed is taken for steady
_KINK = 0.6  # of half the span: steady fringes, vibration and noise stay below


def kinks(cosine: FloatArray) -> NDArray[np.int64]:
    """Return where fringes sampled coarsely do not go on steadily.

    Parameters
    ----------
    cosine : ndarray, shape (n,)
        cos φ at each sample.

    Returns
    -------
    ndarray of int
        Samples at which the mirror turned, jerked, or was seen wrongly.

    Notes
    -----
    At a steady speed c(k+1) + c(k−1) = 2 cos ω · c(k) with ω radians a sample, taken from the samples
    about each. Where the mirror turns at φ, the left side is 2·cos(φ ± ω) instead: off by up to
    2 sin φ sin ω.
    """
    both, inner = cosine[2:] + cosine[:-2], cosine[1:-1]
    weights = np.ones(min(_WINDOW, len(inner)))
    square = np.convolve(inner * inner, weights, "same")
    factor = np.convolve(inner * both, weights, "same") / np.maximum(square, 1e-12)
    return np.asarray(np.flatnonzero(np.abs(both - factor * inner) > _KINK) + 1)


def _reversals(got: Unfolded, drive: FloatArray) -> list[str]:
    """Return whether the mirror went back against the drive by half a fringe and more."""
    ends = np.concatenate([[0], got.turns, [len(got.phase_rad) - 1]])
    way = np.concatenate([[0.0], np.cumsum(np.abs(np.diff(got.phase_rad[ends])))])
    # turns away from the extremes are the mirror's own; noise at a top makes others
    short = np.flatnonzero(~got.passed & (np.abs(np.cos(got.phase_rad[got.turns])) < _TOP)) + 1
    if len(short) < 2:
        return []
    short = np.concatenate([[0], short, [len(ends) - 1]])
    steps = np.diff(way[short])
    # to and fro: of two ways one after the other the shorter one is the way back
    back = np.minimum(steps[:-1], steps[1:])
    driven = np.searchsorted(drive_turns(drive), ends[short])
    alone = driven[2:] == driven[:-2]  # the drive itself does not turn meanwhile
    far = alone & (back > _HALF_FRINGE)
    if not far.any():
        return []
    near = ends[short[np.flatnonzero(far) + 1]]
    first, last, count = int(near[0]), int(near[-1]), len(got.phase_rad)
    rest = ""
    if last < 0.3 * count:
        rest = "; what comes after can be counted by --from"
    elif first > 0.7 * count:
        rest = "; what comes before can be counted by --to"
    where = f"near sample {first}" if last == first else f"from sample {first} to {last}"
    return [
        (
            f"the motion does not follow the drive: {where}, the mirror shakes to and fro by half a fringe "
            f"and more, which the drive does not tell from going on{rest}"
        )
    ]


def _unsteady(got: Unfolded, cosine: FloatArray) -> list[str]:
    """Return whether fringes sampled coarsely go unsteadily, with no drive to tell the direction."""
    if len(got.swings) < 3 or len(cosine) < 3:
        return []
    samples = 2.0 * float(np.quantile(np.diff(got.swings), 0.1))
    spots = kinks(cosine) if samples < _COARSE else np.zeros(0, dtype=np.int64)
    # where a motor starts from rest or stops, the fringes begin and end so
    rests = standing_stretches(cosine, max(int(1.5 * samples), 12), 0.1 + 8.0 * got.cosine_u)
    edges = np.concatenate([rests.ravel(), [-1000]])
    spots = spots[np.abs(spots[:, None] - edges).min(axis=1) > samples]
    if not len(spots):
        return []
    return [
        (
            f"sampled too slowly to see the mirror turn: with {samples:.2g} samples a fringe the fringes go on "
            f"unsteadily at {len(spots)} samples, first at {int(spots[0])}; give the drive (--drive)"
        )
    ]


def shaking_reasons(
    passes: list[Pass], got: Unfolded, cosine: FloatArray, drive: FloatArray | None
) -> list[str]:
    """Return whether the mirror turns more often than a scan does, or where that would not be seen.

    Parameters
    ----------
    passes : list of Pass
        As counted.
    got : Unfolded
        Phase and turns.
    cosine : ndarray, shape (n,)
        cos φ at each sample.
    drive : ndarray, shape (n,), or None
        What moves the mirror.

    Returns
    -------
    list of str
        One line each; empty where nothing was found.
    """
    if drive is not None:
        return _other_turns(passes, drive) + _reversals(got, drive)
    return _many_turns(passes) + _unsteady(got, cosine)


def _other_turns(passes: list[Pass], drive: FloatArray) -> list[str]:
    """Return whether the mirror turns at other times than the drive."""
    turns, seen = drive_turns(drive), len(passes) - 1
    wanted = len(turns)
    legs = np.diff(np.concatenate([[0], turns, [len(drive) - 1]]))
    # a way before the first turn or after the last may be too short to count
    short = int(np.count_nonzero(legs[[0, -1]] < 0.1 * float(np.median(legs))))
    if -max(short, 1) - 0.02 * wanted <= seen - wanted <= 1 + 0.02 * wanted:
        return []
    return [
        (
            f"the motion does not follow the drive: the mirror turns {seen} times, the drive {wanted} "
            "times; vibration is counted"
        )
    ]


def _many_turns(passes: list[Pass]) -> list[str]:
    """Return whether the mirror turns too often to be scanned."""
    short = [one for one in passes[1:-1] if one.fringes < 1.0]
    usual = float(np.median([one.fringes for one in passes]))
    if len(short) < 2 and (len(passes) < 8 or usual > 3.0):
        return []
    return [
        (
            f"no steady scan: the mirror turns {len(passes) - 1} times, after {usual:.2g} fringes as a rule; "
            "its vibration is counted. Give the driven lines (--line), a pilot (--pilot) or the drive (--drive)"
        )
    ]
