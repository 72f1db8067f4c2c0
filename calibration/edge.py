"""The edge: where the distribution of a scanned fringe ends.

A fringe swept over whole turns spends most of its time near its extremes: the values' distribution
rises as 1/√distance towards the edge and is washed out there by noise. The edge is found by maximum
likelihood with the noise's width and the dwell about the extreme as further unknowns, so neither the
motion in time nor the noise need be known, and no minimum or maximum is read off.
"""

import math
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

__all__ = ["Edge", "fit_edge"]

_Z = np.linspace(-9.0, 9.0, 18001)
_PHI = np.array([0.5 * math.erfc(-z / math.sqrt(2.0)) for z in _Z.tolist()])
_REACH = 12.0  # the stretch below the edge that is fitted, in noise widths
_NODES = 240
_MOST_BINS = 400
_TINY = 1e-9


@dataclass(frozen=True)
class Edge:
    """One upper edge.

    Attributes
    ----------
    value : float
        The extreme, in the record's unit.
    noise : float
        Standard deviation of the noise at the edge, same unit.
    pull : ndarray, shape (n_passes,)
        What each pass contributed to ``value``; their sum is zero.
    weight : ndarray, shape (n_passes,)
        Each pass's share of the samples near the edge; their sum is one.
    model_u : float
        Standard uncertainty of ``value`` if all samples were independent.
    """

    value: float
    noise: float
    pull: NDArray[np.float64]
    weight: NDArray[np.float64]
    model_u: float


@dataclass
class _Bins:
    """Counted samples near the edge, and the dwell about the extreme in phase."""

    edges: NDArray[np.float64]
    counts: NDArray[np.float64]
    depth: NDArray[np.float64]
    dwell: NDArray[np.float64]

    def shape(
        self, value: float, log_noise: float, dwell: NDArray[np.float64]
    ) -> tuple[NDArray[np.float64], NDArray[np.float64]]:
        """Return the expected counts and their derivatives by (edge, ln noise, dwell terms)."""
        noise = math.exp(log_noise)
        z = (self.edges[:, None] - (value - self.depth)) / noise
        bell = np.exp(-0.5 * z * z) / math.sqrt(2.0 * math.pi)
        rate = self.dwell @ dwell
        parts = np.diff(np.interp(z, _Z, _PHI), axis=0) @ self.dwell
        by_edge = np.diff(-bell / noise, axis=0) @ rate
        by_noise = np.diff(-z * bell, axis=0) @ rate
        return parts @ dwell, np.column_stack([by_edge, by_noise, parts])


def _likelihood(counts: NDArray[np.float64], expected: NDArray[np.float64]) -> float:
    rate = np.maximum(expected, _TINY)
    return float(np.sum(counts * np.log(rate) - rate))


def _count(
    values: NDArray[np.float64], value: float, half_span: float, noise: float, step: float
) -> tuple[_Bins, NDArray[np.int64], NDArray[np.bool_]]:
    """Count the samples near the edge in bins that hold whole steps of the converter."""
    reach = min(max(_REACH * noise, 10.0 * step), 0.6 * half_span)
    end = max(float(values.max()) + step, value + 6.0 * noise)
    width = max(noise / 3.0, (end - value + reach) / _MOST_BINS)
    start = value - reach
    if step > 0.0:
        width = max(step, round(width / step) * step)
        origin = float(values[0])
        start = origin + (math.floor((start - origin) / step) + 0.5) * step
    n_bins = math.ceil((end - start) / width) + 1
    near = values >= start
    place = np.minimum(((values[near] - start) / width).astype(np.int64), n_bins - 1)
    furthest = math.acos(1.0 - min((reach + 6.0 * noise) / half_span, 1.9))
    phase = (np.arange(_NODES) + 0.5) * furthest / _NODES
    dwell = np.column_stack([np.ones(_NODES), (phase / furthest) ** 2])
    bins = _Bins(
        np.asarray(start + width * np.arange(n_bins + 1)),
        np.bincount(place, minlength=n_bins).astype(np.float64),
        half_span * (1.0 - np.cos(phase)),
        dwell,
    )
    return bins, place, near


def _information(
    slope: NDArray[np.float64],
    expected: NDArray[np.float64],
    noise: float,
    dwell: NDArray[np.float64],
) -> NDArray[np.float64]:
    """Return the Fisher information, with that of one more sample so that it is never singular."""
    scale = max(float(dwell[0]), _TINY)
    one = np.array([1.0 / noise**2, 1.0, 1.0 / scale**2, 1.0 / scale**2])
    return np.asarray(slope.T @ (slope / expected[:, None]) + np.diag(one))


def _climb(
    bins: _Bins, value: float, noise: float
) -> tuple[float, float, NDArray[np.float64], NDArray[np.float64], NDArray[np.float64]]:
    """Maximise the likelihood by Fisher scoring; return edge, ln noise, dwell, expected, slope."""
    log_noise = math.log(noise)
    first, _ = bins.shape(value, log_noise, np.array([1.0, 0.0]))
    dwell = np.array([bins.counts.sum() / max(first.sum(), _TINY), 0.0])
    expected, slope = bins.shape(value, log_noise, dwell)
    best = _likelihood(bins.counts, expected)
    for _ in range(40):
        rate = np.maximum(expected, _TINY)
        info = _information(slope, rate, math.exp(log_noise), dwell)
        step = np.linalg.solve(info, slope.T @ ((bins.counts - rate) / rate))
        cut = min(1.0, 1.5 * math.exp(log_noise) / max(abs(step[0]), 1e-300))
        cut = min(cut, 0.5 / max(abs(step[1]), 1e-300))
        for _ in range(12):
            trial = (value + cut * step[0], log_noise + cut * step[1], dwell + cut * step[2:])
            expected_t, slope_t = bins.shape(*trial)
            gain = _likelihood(bins.counts, expected_t) - best
            if gain >= -1e-9 and -0.8 * trial[2][0] < trial[2][1] < 3.0 * trial[2][0]:
                break
            cut /= 2.0
        else:
            break
        value, log_noise, dwell = trial
        expected, slope, best = expected_t, slope_t, best + gain
        if gain < 1e-7:
            break
    return value, log_noise, dwell, np.maximum(expected, _TINY), slope


def fit_edge(
    values: NDArray[np.float64],
    passes: NDArray[np.int64],
    half_span: float,
    noise: float,
    step: float = 0.0,
) -> Edge:
    """Fit the upper edge of a scanned fringe.

    Parameters
    ----------
    values : ndarray, shape (n,)
        Record over at least one fringe, any unit, no NaN. For the lower edge hand in ``-values``.
    passes : ndarray of int, shape (n,)
        Number of the pass that each sample belongs to.
    half_span : float
        Roughly half of high − low, same unit: the bend of the fringe's top.
    noise : float
        First guess of the noise's standard deviation, same unit; > 0.
    step : float, optional
        The converter's step, same unit; 0 when the values are continuous.

    Returns
    -------
    Edge
        The extreme with what each pass contributed.

    Notes
    -----
    Expected counts in a bin: ∫ (a + b φ²)·P(bin | edge − half_span·(1 − cos φ), noise) dφ. Odd
    terms of the dwell cancel because φ and −φ give the same value.
    """
    value = float(np.quantile(values, 0.995)) - noise
    # power noise makes one edge far sharper than the other; below 0.03 % of the span nothing is gained
    least, most = (
        max(0.03 * noise, 3e-4 * half_span, 0.1 * step),
        max(12.0 * noise, 0.02 * half_span),
    )
    noise = max(
        noise, 0.01 * half_span
    )  # a coarse look first, so that the edge lies in the stretch
    for _ in range(10):
        bins, place, near = _count(values, value, half_span, noise, step)
        value, log_noise, dwell, expected, slope = _climb(bins, value, noise)
        settled = abs(log_noise - math.log(noise)) < 0.1
        # bins wider than the noise say little about it: approach it from above, step by step
        noise = min(max(math.exp(log_noise), least, noise / 2.5), most)
        if settled:
            break
    n_passes = int(passes.max()) + 1
    table = np.zeros((n_passes, len(bins.counts)))
    np.add.at(table, (passes[near], place), 1.0)
    weight = table.sum(axis=1) / max(bins.counts.sum(), 1.0)
    score = table @ (slope / expected[:, None]) - np.outer(weight, slope.sum(axis=0))
    spread = np.linalg.inv(_information(slope, expected, noise, dwell))
    return Edge(
        float(value), noise, (score @ spread)[:, 0], weight, math.sqrt(max(spread[0, 0], 0.0))
    )
