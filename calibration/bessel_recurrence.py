"""Depth from Bessel recurrences: many harmonics of one deep line, each with its two next of its parity."""

import math

import numpy as np
from numpy.typing import NDArray

__all__ = ["recurrence_depth", "signed_harmonics"]

FloatArray = NDArray[np.float64]

_MOST_SAMPLES = 200_000
_CHUNK = 4096


def signed_harmonics(
    values: FloatArray, angle_rad: FloatArray, highest: int
) -> tuple[FloatArray, float]:
    """Return the harmonics of a driven fringe in step with the line, signs included.

    Parameters
    ----------
    values : ndarray, shape (n,)
        Photodiode record, any unit; NaN where samples are missing.
    angle_rad : ndarray, shape (n,)
        2πft + ψ, the phase of the line's own motion [rad].
    highest : int
        Harmonics wanted.

    Returns
    -------
    harmonics : ndarray, shape (highest + 1,)
        2a·cos φ0·J_n for even n, 2a·sin φ0·J_n for odd n, a the half span; [0] is 0.
    u : float
        Standard uncertainty of each, from what the harmonics in quadrature to the line hold.

    Notes
    -----
    a·cos(φ0 + m·cos θ), by the expansion of Jacobi and Anger (Abramowitz & Stegun 1964, 9.1.44–45, from
    memory). A Hann window keeps harmonics of broken periods apart.
    """
    start = max((len(values) - _MOST_SAMPLES) // 2, 0)
    record, angle = values[start : start + _MOST_SAMPLES], angle_rad[start : start + _MOST_SAMPLES]
    good = np.isfinite(record)
    window = np.where(good, np.hanning(len(record) + 2)[1:-1], 0.0)
    weight = float(window.sum())
    level = float(np.sum(window * np.where(good, record, 0.0))) / weight
    bare = window * (np.where(good, record, level) - level)
    orders = np.arange(highest + 1)
    total = np.zeros(highest + 1, dtype=np.complex128)
    for first in range(0, len(record), _CHUNK):
        part = slice(first, first + _CHUNK)
        total += bare[part] @ np.exp(-1j * np.outer(angle[part], orders))
    size = 2.0 * total / weight
    sign = np.array([1.0, -1.0, -1.0, 1.0])[orders % 4]  # of J_n in the expansion
    u = float(np.sqrt(np.mean(size.imag[1:] ** 2)))
    out = sign * size.real
    out[0] = 0.0
    return np.asarray(out), u


def _terms(harmonics: FloatArray) -> tuple[FloatArray, FloatArray, FloatArray]:
    """Return y and x of y = m²·x for n ≥ 3, and the orders."""
    order = np.arange(3, harmonics.shape[-1] - 2)
    left = 4.0 * order * harmonics[..., order]
    right = (harmonics[..., order - 2] + harmonics[..., order]) / (order - 1)
    right = right + (harmonics[..., order] + harmonics[..., order + 2]) / (order + 1)
    return left, right, order.astype(float)


def _misfit(square: FloatArray, harmonics: FloatArray, u: float) -> FloatArray:
    """Return χ² for some m², of the same harmonics or each of its own."""
    left, right, order = _terms(harmonics)
    m2 = square[:, None]
    own = 4.0 * order - m2 * (1.0 / (order - 1.0) + 1.0 / (order + 1.0))
    variance = own**2 + m2**2 * (1.0 / (order - 1.0) ** 2 + 1.0 / (order + 1.0) ** 2)
    return np.asarray(np.sum((left - m2 * right) ** 2 / variance, axis=1) / u**2)


def recurrence_depth(harmonics: FloatArray, u: float) -> tuple[float, float, float]:
    """Return the depth that fits the recurrences of all harmonics.

    Parameters
    ----------
    harmonics : ndarray, shape (n + 1,)
        As from `signed_harmonics`; at least 6, and up to some above the depth.
    u : float
        Standard uncertainty of each; > 0.

    Returns
    -------
    depth, depth_u : float
        Depth and its standard uncertainty [rad]; nan where nothing fits.
    misfit : float
        χ² over its degrees of freedom; about 1 where the harmonics are those of one steady line.

    Notes
    -----
    From J_{n−1} + J_{n+1} = (2n/m)·J_n, used twice so that only harmonics of one parity enter and the
    working point drops out: 4n·J_n = m²·[(J_{n−2} + J_n)/(n − 1) + (J_n + J_{n+2})/(n + 1)].

    References
    ----------
    M. Abramowitz, I. A. Stegun 1964, 9.1.27 (recurrence, from memory). Recurrences of higher harmonics
    for depths of up to 100π rad are in the literature on the spectral analysis of homodyne
    interferometers after Sudarshanam & Srinivasan 1989 (from memory).
    """
    count = len(harmonics) - 5
    if count < 1 or not u > 0.0:
        return math.nan, math.nan, math.nan
    grid = np.arange(0.5, len(harmonics) + 3.0, 0.01)
    chi = np.concatenate([_misfit(part**2, harmonics, u) for part in np.array_split(grid, 40)])
    best = int(np.argmin(chi))
    depth, step = float(grid[best]), 0.005
    for _ in range(40):
        near = np.array([depth - step, depth, depth + step])
        low, middle, high = _misfit(near**2, harmonics, u).tolist()
        bend = low - 2.0 * middle + high
        if not bend > 0.0:
            break
        moved = 0.5 * step * (low - high) / bend
        depth += max(min(moved, 2.0 * step), -2.0 * step)
        if abs(moved) < 1e-9 * depth:
            break
        step = max(min(step, 10.0 * abs(moved)), 1e-5 * depth)
    if not bend > 0.0:
        return math.nan, math.nan, math.nan
    return depth, _spread(depth, harmonics, u), middle / max(count - 1, 1)


def _spread(depth: float, harmonics: FloatArray, u: float) -> float:
    """Return the standard uncertainty: neighbouring recurrences share harmonics, so by each of them.

    The depth is where the slope of χ² vanishes: what a change of one harmonic does to the slope, over
    the bend, is what it does to the depth.
    """
    step = 1e-4 * depth
    moved = harmonics + u * np.eye(len(harmonics))[1:]
    beside = (np.full(len(moved), depth - step), np.full(len(moved), depth + step))
    slope = np.subtract(*(_misfit(at**2, moved, u) for at in beside[::-1])) / (2.0 * step)
    three = _misfit(np.array([depth - step, depth, depth + step]) ** 2, harmonics, u)
    own = float(three[2] - three[0]) / (2.0 * step)
    bend = float(three[0] - 2.0 * three[1] + three[2]) / step**2
    return math.sqrt(float(np.sum((slope - own) ** 2))) / bend if bend > 0.0 else math.nan
