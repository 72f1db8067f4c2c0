"""A scan whose fringe leans with the drive: an actuator that tilts its mirror changes the light.

A scan drives the actuator a hundred times farther than lines do, so that a tilt which hardly shows in
a line moves top and bottom of the fringe from one end of the scan to the other. Both are followed from
pass to pass against the recorded drive, and the scan is brought to the fringe at one drive.
"""

from dataclasses import dataclass
from itertools import pairwise
from math import sqrt

import numpy as np
from numpy.typing import NDArray

from metro.kernel.student import t_quantile

__all__ = ["Lean", "level_scan"]

FloatArray = NDArray[np.float64]
Pass = tuple[float, float, float]
"""Height [V], drive [V] and place [samples] of a top."""

PASSES_MIN = 3  # over the top and over the bottom, to follow them against the drive
PASSES_TIMED = 8  # from which their drift in time is told from that
SEEN = 0.999  # confidence that a slope is none of the scatter's, from which it is taken for real
LOWER, UPPER = 0.3, 0.7  # of the scan's range: a pass goes from beyond one to beyond the other
CAP = 0.08  # of the range: part of a pass next to its extreme to which a parabola is fitted
CAP_MIN = 5  # samples of it


@dataclass(frozen=True)
class Lean:
    """How top and bottom of the fringe move with the drive.

    Parameters
    ----------
    high_slope, low_slope : float
        Volts per volt of the drive's reading.
    """

    high_slope: float
    low_slope: float


def level_scan(
    volts: FloatArray, drive_v: FloatArray, at_drive_v: float = 0.0
) -> tuple[FloatArray, Lean | None]:
    """Return a scan with its fringe as it would be at one drive all along.

    Parameters
    ----------
    volts : ndarray, shape (n,)
        Photodiode samples [V], NaN where missing.
    drive_v : ndarray, shape (n,)
        The drive's reading [V].
    at_drive_v : float
        The drive at which lines are measured [V].

    Returns
    -------
    tuple of (ndarray of shape (n,), Lean or None)
        The same array and None where too few passes are there or no lean is seen.
    """
    good = np.isfinite(volts) & np.isfinite(drive_v)
    if np.count_nonzero(good) < 100:
        return volts, None
    known, drive = volts[good], drive_v[good]
    range_v = float(np.ptp(known))
    tops = _extremes(known, drive, range_v)
    bottoms = _extremes(-known, drive, range_v)
    if min(len(tops), len(bottoms)) < PASSES_MIN or np.ptp(drive) == 0:
        return volts, None
    high, low = _straight(tops), _straight(bottoms)
    if not any(abs(slope) > least for _, slope, least in (high, low)):
        return volts, None
    lean = Lean(high[1], -low[1])
    away = drive_v - at_drive_v
    top_here = high[0] + lean.high_slope * at_drive_v
    bottom_here = -low[0] + lean.low_slope * at_drive_v
    mid, swing = (top_here + bottom_here) / 2, (top_here - bottom_here) / 2
    moved_mid = mid + (lean.high_slope + lean.low_slope) / 2 * away
    moved_swing = swing + (lean.high_slope - lean.low_slope) / 2 * away
    return np.asarray(mid + swing * (volts - moved_mid) / moved_swing), lean


def _extremes(volts: FloatArray, drive_v: FloatArray, range_v: float) -> list[Pass]:
    """Return (top, drive, time in samples) of each whole pass over a top of the fringe."""
    least = float(volts.min())
    outside = np.zeros(volts.size, dtype=np.int8)
    outside[volts > least + UPPER * range_v] = 1
    outside[volts < least + LOWER * range_v] = -1
    marks = np.flatnonzero(outside)  # between the thresholds nothing changes: hysteresis
    turns = np.flatnonzero(np.diff(outside[marks])) + 1
    found: list[Pass] = []
    for start, stop in pairwise(turns):
        first, last = int(marks[start]), int(marks[stop - 1])
        if outside[first] == 1:
            top = _cap(volts[first : last + 1], range_v)
            if top is not None and _runs_through(drive_v[first : last + 1]):
                place = first + top[1]
                found.append((top[0], float(drive_v[min(last, int(place))]), place))
    return found


def _runs_through(drive_v: FloatArray) -> bool:
    """Return whether a drive goes one way: where it turns, a pass may end short of the extreme."""
    moved = float(drive_v[-1] - drive_v[0])
    return abs(moved) > 0.8 * float(np.ptp(drive_v)) and moved != 0


def _cap(volts: FloatArray, range_v: float) -> tuple[float, float] | None:
    """Return the vertex of a parabola through the top of a pass: its height and place."""
    places = np.flatnonzero(volts > volts.max() - CAP * range_v)
    if places.size < CAP_MIN:
        return None
    middle, width = float(places.mean()), max(1.0, float(np.ptp(places)) / 2)
    x = (places - middle) / width
    bend, slope, level = np.polyfit(x, volts[places], 2)
    if not bend < 0 or abs(slope / (2 * bend)) > 1:
        return None
    at = -slope / (2 * bend)
    return float(level - slope**2 / (4 * bend)), middle + width * at


def _straight(passes: list[Pass]) -> tuple[float, float, float]:
    """Return the tops at no drive, their slope against the drive, and the least that counts."""
    top, drive, place = (np.array(column) for column in zip(*passes, strict=True))
    moved = place - place.mean()
    columns = [np.ones(top.size), drive]
    if top.size >= PASSES_TIMED:
        columns.append(moved / max(1.0, float(np.abs(moved).max())))
    matrix = np.stack(columns, axis=1)
    solution, *_ = np.linalg.lstsq(matrix, top, rcond=None)
    left = top - matrix @ solution
    dof = top.size - len(columns)
    variance = float(left @ left) / dof
    inverse = np.linalg.pinv(matrix.T @ matrix)
    u = sqrt(max(0.0, variance * float(inverse[1, 1])))
    return float(solution[0]), float(solution[1]), t_quantile(SEEN, dof) * u
