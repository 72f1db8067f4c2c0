"""A swept record made ready for counting: gaps bridged, lone spikes taken out, noise averaged."""

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from calibration.smoother import floor_std, noise_gain, noise_std, smooth

__all__ = ["SweptRecord", "averaged", "ready_to_count", "record_noise"]

FloatArray = NDArray[np.float64]

_LONGEST = 65  # samples averaged at most


@dataclass(frozen=True)
class SweptRecord:
    """A record without holes.

    Attributes
    ----------
    values : ndarray, shape (n,)
        Averaged where sampled finely, in the record's unit.
    noise : float
        Standard deviation of the noise left, same unit.
    first : int
        Index of ``values[0]`` in the record it came from.
    gaps : ndarray of int, shape (k, 2)
        First missing sample of each gap, counted from ``first``, and its length.
    spikes : int
        Lone samples far off their neighbours, which were taken out.
    """

    values: FloatArray
    noise: float
    first: int
    gaps: NDArray[np.int64]
    spikes: int


def _gaps(missing: NDArray[np.bool_]) -> NDArray[np.int64]:
    edges = np.flatnonzero(np.diff(missing.astype(np.int8), prepend=0, append=0))
    return np.stack([edges[::2], np.diff(edges)[::2]], axis=1)


def _without_spikes(values: FloatArray, noise: float) -> tuple[FloatArray, int]:
    """Take out single samples that stand out from both neighbours by half the span and more."""
    low, high = np.quantile(values, [0.02, 0.98])
    limit = max(0.5 * float(high - low), 12.0 * noise)
    inner = values[1:-1]
    other = 0.5 * (values[:-2] + values[2:])
    lone = (np.abs(inner - other) > limit) & (
        (inner > high + 0.25 * limit) | (inner < low - 0.25 * limit)
    )
    where = np.flatnonzero(lone) + 1
    if not len(where):
        return values, 0
    out = values.copy()
    out[where] = 0.5 * (values[where - 1] + values[where + 1])
    return out, len(where)


def averaged(values: FloatArray, length: int) -> FloatArray:
    """Return local parabolas' middle values; near the ends, the end parabola's.

    Parameters
    ----------
    values : ndarray, shape (n,)
        Record, no NaN.
    length : int
        Samples in one parabola, odd; below 5 nothing is averaged.

    Returns
    -------
    ndarray, shape (n,)
        As long as the record.
    """
    if length < 5 or len(values) < 2 * length:
        return values
    out = smooth(values, length)
    half = length // 2
    place = np.arange(length) - half
    for part, ends in (
        (slice(0, length), slice(0, half)),
        (slice(-length, None), slice(-half, None)),
    ):
        out[part][ends] = np.polyval(np.polyfit(place, values[part], 2), place)[ends]
    return out


def _samples_in_half_fringe(values: FloatArray, noise: float) -> float:
    """Return about how many samples the fastest half fringes have."""
    low, high = np.quantile(values, [0.02, 0.98])
    side = np.sign(values - 0.5 * (low + high))
    side[np.abs(values - 0.5 * (low + high)) < min(4.0 * noise, 0.25 * float(high - low))] = 0.0
    seen = np.flatnonzero(side)
    crossings = seen[1:][np.diff(side[seen]) != 0.0]
    if len(crossings) < 3:
        return float(len(values))
    return float(np.quantile(np.diff(crossings), 0.02))


def _length(half_fringe: float) -> int:
    """Return how many samples to average: a sixth of a half fringe, which bends it by 1e-4."""
    return max(min(2 * int(half_fringe / 12.0) + 1, _LONGEST), 1)


def record_noise(values: FloatArray) -> float:
    """Return the noise of a swept record, however coarsely the fringes are sampled.

    Parameters
    ----------
    values : ndarray, shape (n,)
        Record, any unit; NaN where samples are missing.

    Returns
    -------
    float
        Standard deviation; the spectrum's floor where the third differences hold more than noise.
    """
    good = values[np.isfinite(values)]
    noise = noise_std(values) or noise_std(good)
    low, high = np.quantile(good, [0.02, 0.98])
    if noise < 0.02 * float(high - low):
        return noise
    return min(noise, floor_std(values) or noise)


def ready_to_count(values: FloatArray) -> SweptRecord:
    """Return a record ready for counting.

    Parameters
    ----------
    values : ndarray, shape (n,)
        Photodiode record, any unit; NaN where samples are missing; at least 40 are there.

    Returns
    -------
    SweptRecord
        Without NaN; gaps are bridged by straight lines and listed.
    """
    good = np.flatnonzero(np.isfinite(values))
    first, stop = int(good[0]), int(good[-1]) + 1
    inner = values[first:stop]
    filled = np.interp(np.arange(first, stop), good, values[good])
    raw = record_noise(values)
    filled, spikes = _without_spikes(filled, raw)
    length = _length(_samples_in_half_fringe(filled, raw))
    level = averaged(filled, length)
    noise = max(raw * noise_gain(length) ** 0.5, 1e-6 * float(np.ptp(values[good])))
    return SweptRecord(level, noise, first, _gaps(~np.isfinite(inner)), spikes)
