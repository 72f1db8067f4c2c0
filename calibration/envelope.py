"""The envelope: a fringe's extremes along a record whose level or contrast may change."""

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from calibration.turning_points import turning_points

__all__ = ["Envelope", "constant_envelope", "running_envelope", "running_median"]

FloatArray = NDArray[np.float64]

_NEIGHBOURS = 7  # tops that a running median goes over: one that turned short changes nothing
_MOST_BEYOND = 0.5  # of what the levels differ: so far a trend is carried on


@dataclass(frozen=True)
class Envelope:
    """Extremes of the fringe at each sample.

    Attributes
    ----------
    low, high : ndarray, shape (n,)
        In the record's unit.
    """

    low: FloatArray
    high: FloatArray

    @property
    def half_span(self) -> FloatArray:
        """Half of high − low at each sample.

        Returns
        -------
        ndarray, shape (n,)
            In the record's unit.
        """
        return (self.high - self.low) / 2.0

    def cosine(self, values: FloatArray) -> FloatArray:
        """Return cos φ of a record, beyond ±1 where it leaves the envelope.

        Parameters
        ----------
        values : ndarray, shape (n,)
            In the record's unit.

        Returns
        -------
        ndarray, shape (n,)
            Dimensionless.
        """
        return np.asarray((values - (self.high + self.low) / 2.0) / self.half_span)


def constant_envelope(
    count: int, low: float, high: float, drift: tuple[float, float] = (0.0, 0.0)
) -> Envelope:
    """Return an envelope that is straight.

    Parameters
    ----------
    count : int
        Samples.
    low, high : float
        Extremes at the middle of the record.
    drift : tuple of float
        Their changes from the first sample to the last.

    Returns
    -------
    Envelope
        In the unit of ``low``.
    """
    when = np.linspace(-0.5, 0.5, count)
    return Envelope(low + drift[0] * when, high + drift[1] * when)


def running_median(levels: FloatArray, neighbours: int) -> FloatArray:
    """Return the median over so many neighbours, the ends mirrored.

    Parameters
    ----------
    levels : ndarray, shape (k,)
        Any unit; at least one.
    neighbours : int
        Odd; fewer are taken where there are fewer levels.

    Returns
    -------
    ndarray, shape (k,)
        Same unit.
    """
    half = min(neighbours, len(levels)) // 2
    if len(levels) <= 2 * half:
        return np.full(len(levels), np.median(levels))
    padded = np.pad(levels, half, mode="reflect")
    windows = np.lib.stride_tricks.sliding_window_view(padded, 2 * half + 1)
    return np.asarray(np.median(windows, axis=1))


def _along(count: int, places: NDArray[np.int64], levels: FloatArray) -> FloatArray:
    """Return the running median of levels at every sample, its trend carried on to both ends."""
    half = _NEIGHBOURS // 2
    if len(levels) < 2 * _NEIGHBOURS:
        return np.interp(np.arange(count), places, running_median(levels, _NEIGHBOURS))
    middles = running_median(levels, _NEIGHBOURS)[half:-half]
    at = places[half : len(places) - half].astype(float)
    reach = _MOST_BEYOND * float(np.median(np.abs(levels - np.median(levels))) + np.ptp(middles))
    points, level = [at], [middles]
    for end, near, next_one in ((0.0, 0, half), (count - 1.0, -1, -1 - half)):
        slope = (middles[near] - middles[next_one]) / (at[near] - at[next_one])
        on = middles[near] + float(np.clip(slope * (end - at[near]), -reach, reach))
        points.insert(0 if near == 0 else len(points), np.array([end]))
        level.insert(0 if near == 0 else len(level), np.array([on]))
    return np.interp(np.arange(count), np.concatenate(points), np.concatenate(level))


def running_envelope(
    values: FloatArray, noise: float, least_swing: float = 0.15
) -> Envelope | None:
    """Return the envelope that runs along the tops and bottoms of a record.

    Parameters
    ----------
    values : ndarray, shape (n,)
        Record, any unit, no NaN.
    noise : float
        Standard deviation of its noise, same unit.
    least_swing : float, optional
        Swings below this share of the whole range are no fringes.

    Returns
    -------
    Envelope or None
        None where there are fewer than three tops or three bottoms.
    """
    low, high = np.quantile(values, [0.01, 0.99])
    turns = turning_points(values, max(least_swing * float(high - low), 7.0 * noise))
    levels = values[turns]
    if len(turns) < 6:
        return None
    is_top = np.diff(levels, prepend=levels[1]) > 0.0
    ends = [_along(len(values), turns[side], levels[side]) for side in (~is_top, is_top)]
    least = 0.02 * float(high - low)
    return Envelope(ends[0], np.maximum(ends[1], ends[0] + least))
