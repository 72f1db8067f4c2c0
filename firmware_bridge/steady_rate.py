"""The steady step behind time stamps, and its uncertainty."""

import math
from dataclasses import dataclass
from typing import Any

import numpy as np
from numpy.typing import NDArray

__all__ = [
    "StepFit",
    "fit_step",
    "is_steady",
    "maybe_exact_step_s",
    "maybe_single_step_s",
]

_BLOCKS = 32
_SMALLEST_BLOCK = 8  # rows
_WHOLE = 0.2  # steps: how far a multiple of the step may be from a whole number
_LONG = 20  # steps: longer ones are gaps and tell nothing about the step
_SLACK = 0.6  # of the last printed digit: rounding is half a digit on each side, and a little more
_EVEN = 0.25  # spread of the distances between double steps, below which they come of rounding


@dataclass(frozen=True, slots=True)
class StepFit:
    """A straight line through stamps over their places.

    Attributes
    ----------
    step_s, step_u_s : float
        Time between samples and its standard uncertainty [s].
    scatter_s, worst_s : float
        Rms and largest distance of the stamps from the line [s].
    is_rounding : bool
        True where the rounding of the stamps explains their scatter.
    """

    step_s: float
    step_u_s: float
    scatter_s: float
    worst_s: float
    is_rounding: bool


def fit_step(
    stamps: NDArray[np.float64],
    index: NDArray[np.int64],
    resolution_s: float,
    broken: NDArray[np.bool_] | None = None,
) -> StepFit:
    """Fit straight lines of one slope to stamps over their places on the grid.

    Parameters
    ----------
    stamps : ndarray, shape (n,)
        Time stamps [s].
    index : ndarray, shape (n,)
        Their places.
    resolution_s : float
        The last printed digit [s].
    broken : ndarray of bool, shape (n - 1,), optional
        Where a step parts two pieces, each with a line of its own: a long gap need not be a whole
        number of samples.

    Returns
    -------
    StepFit
        By least squares. The uncertainty grows with how slowly the stamps wander (the scatter of
        block means against that of single stamps); where rounding is all there is, it is that of
        two rounded end points (rectangular, GUM 4.3.7), since the rounding errors of a regular
        grid are not independent.
    """
    starts = np.concatenate(([0], [] if broken is None else np.flatnonzero(broken) + 1)).astype(int)
    places, times = _centred(index, starts), _centred(stamps - stamps[0], starts)
    square = float(places @ places)
    if square == 0:  # single samples only
        return StepFit(float(np.median(np.diff(stamps))), math.inf, 0.0, 0.0, False)
    step = float(places @ times) / square
    residual = times - step * places
    scatter = math.sqrt(float(residual @ residual) / max(1, stamps.size - 2))
    worst = float(np.abs(residual).max())
    rounded_u = resolution_s / math.sqrt(6) / float(index[-1] - index[0])
    u = max(scatter * _wander(residual) / math.sqrt(square), rounded_u)
    return StepFit(step, u, scatter, worst, worst <= _SLACK * resolution_s)


def _centred(values: NDArray[Any], starts: NDArray[np.int64]) -> NDArray[np.float64]:
    """Return values less the mean of their piece."""
    sizes = np.diff(np.concatenate((starts, [values.size])))
    centred: NDArray[np.float64] = values - np.repeat(
        np.add.reduceat(values, starts) / sizes, sizes
    )
    return centred


def _wander(residual: NDArray[np.float64]) -> float:
    """Return by how much slow wander widens a mean: block means against independent values."""
    size = max(residual.size // _BLOCKS, 1)
    if size < _SMALLEST_BLOCK:
        return 1.0
    means = residual[: size * _BLOCKS].reshape(_BLOCKS, size).mean(axis=1)
    variance = float(residual @ residual) / residual.size
    return (
        math.sqrt(max(1.0, size * float(means @ means) / _BLOCKS / variance)) if variance else 1.0
    )


def is_steady(stamps: NDArray[np.float64], index: NDArray[np.int64], resolution_s: float) -> bool:
    """Tell whether stamps lie on a straight line as well as their rounding or a quarter step allow.

    Parameters
    ----------
    stamps : ndarray, shape (n,)
        Time stamps [s].
    index : ndarray, shape (n,)
        Their places.
    resolution_s : float
        The last printed digit [s].

    Returns
    -------
    bool
        A sample missing anywhere moves some stamp by at least half a step off any line.
    """
    fit = fit_step(stamps, index, resolution_s)
    return fit.step_s > 0 and fit.worst_s <= max(_SLACK * resolution_s, 0.25 * fit.step_s)


def maybe_exact_step_s(steps: NDArray[np.float64], resolution_s: float) -> float | None:
    """Return the step of stamps that rounding leaves whole, so that any longer step is a gap.

    Parameters
    ----------
    steps : ndarray, shape (n - 1,)
        Differences of the stamps [s].
    resolution_s : float
        The last printed digit [s].

    Returns
    -------
    float or None
        The step where every step is a multiple of it, such as milliseconds counted at 1 kHz; None
        elsewhere, also where double steps come so evenly that a slightly longer step is rounded.
    """
    step = float(np.median(steps))
    if not step > 0.5 * resolution_s:
        return None
    multiples = np.rint(steps / step)
    if multiples.min() < 1 or np.abs(steps - multiples * step).max() > 0.01 * step:
        return None
    longer = np.flatnonzero(multiples > 1)
    if longer.size > 0.5 * steps.size:
        return None
    if round(step / resolution_s) == 1 and longer.size > 3 and multiples.max() == 2:
        distances = np.diff(longer)
        if distances.std() < _EVEN * distances.mean():
            return None
    return step


def maybe_single_step_s(steps: NDArray[np.float64], resolution_s: float) -> float | None:
    """Return the time between neighbouring samples, where nearly all steps are multiples of it.

    Parameters
    ----------
    steps : ndarray, shape (n - 1,)
        Differences of the stamps [s].
    resolution_s : float
        The last printed digit [s].

    Returns
    -------
    float or None
        The step; None where the stamps are too coarse or too uneven.
    """
    rising = steps[steps > 2.5 * resolution_s]
    if rising.size < 0.5 * steps.size:
        return None
    median, low = np.percentile(rising, [50, 10])
    for guess in (median, low):
        near = rising[np.abs(rising - guess) < _WHOLE * guess]
        step = float(np.mean(near)) if near.size else float(guess)
        multiples = steps[steps < _LONG * step] / step
        if multiples.size < 0.5 * steps.size:
            continue
        whole = np.abs(multiples - np.rint(multiples)) < _WHOLE
        # Late stamps give steps that are no multiples; they must stay the exception.
        if np.mean(whole) > 0.9 and np.mean(multiples < 0.5) < 0.1:
            return step
    return None
