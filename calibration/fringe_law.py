"""The fringe law's harmonics: whether a scanned fringe is a cosine.

A ghost beam, feedback, saturation or clipping adds cos 2φ, cos 3φ … to the law. They are read from
stretches of one and a half fringes, each with its own smooth motion, so that neither the motion of
the scan nor its turning points need be known; what shakes the mirror averages out over stretches.
"""

import math

import numpy as np
from numpy.typing import NDArray

__all__ = ["law_harmonics"]

_PASSES = 3
_POINTS = 300
_MOST = 120  # stretches looked at in a long scan
_ORDERS = np.arange(4)


def _stretch(
    values: NDArray[np.float64],
    time: NDArray[np.float64],
    begins_high: bool,  # private
) -> tuple[float, NDArray[np.float64]]:
    """Fit the law with φ a cubic in time; return the residual's rms and the harmonics.

    The law is d + b·cos φ + h₂·cos 2φ + h₃·cos 3φ: d and b are free because shaking within the stretch
    takes from the cosine.
    """
    middle = (
        math.pi if begins_high else 2.0 * math.pi
    )  # half-way through the second of three passes
    powers = np.stack([np.ones_like(time), time, time**2, time**3], axis=1)
    theta = kept = np.array([middle, 1.5 * math.pi, 0.0, 0.0, 0.0, 1.0, 0.0, 0.0])
    rest, damping = np.inf, 1e-2
    matrix, right = np.eye(8), np.zeros(8)
    for _ in range(25):
        phase = powers @ theta[:4]
        waves = np.cos(np.outer(phase, _ORDERS))
        slope = -np.sin(np.outer(phase, _ORDERS)) @ (_ORDERS * theta[4:])
        error = values - waves @ theta[4:]
        now = float(np.sqrt(np.mean(error**2)))
        if now > rest * 1.001:
            theta, damping = kept, damping * 8.0
        else:
            done = rest - now < 1e-6 * now
            rest, kept, damping = now, theta, damping / 4.0
            columns = np.hstack([powers * slope[:, None], waves])
            matrix, right = columns.T @ columns, columns.T @ error
            if done:
                break
        lifted = matrix + damping * np.diag(np.diag(matrix)) + 1e-9 * np.eye(8) * len(time)
        theta = kept + np.linalg.solve(lifted, right)
    return rest, kept[6:] / max(abs(kept[5]), 0.1)


def law_harmonics(
    values: NDArray[np.float64], passes: NDArray[np.int64], low: float, high: float
) -> tuple[NDArray[np.float64], NDArray[np.float64]]:
    """Return the second and third harmonic of the fringe law relative to the first.

    Parameters
    ----------
    values : ndarray, shape (n,)
        Scan over whole fringes, no NaN.
    passes : ndarray of int, shape (n,)
        Number of the pass over an extreme that each sample belongs to.
    low, high : float
        Extremes, in the scan's unit.

    Returns
    -------
    ndarray, shape (2,)
        cos 2φ and cos 3φ relative to cos φ; empty where fewer than four stretches could be used.
    ndarray, shape (2,)
        Their standard uncertainties, from the scatter between stretches.
    """
    level = (values - (high + low) / 2.0) * (2.0 / (high - low))
    begins = np.concatenate([[0], np.flatnonzero(np.diff(passes)) + 1, [len(values)]])
    found = []
    stretches = range(1, len(begins) - _PASSES - 1)
    for k in stretches[:: max(len(stretches) // _MOST, 1)]:
        first, last = int(begins[k]), int(begins[k + _PASSES])
        if last - first < 40:
            continue
        place = np.unique(np.linspace(first, last - 1, _POINTS).astype(np.int64))
        time = 2.0 * (place - first) / (last - 1 - first) - 1.0
        top = bool(level[first : int(begins[k + 1])].mean() > 0.0)
        rest, share = _stretch(level[place], time, top)
        found.append([rest, *share.tolist()])
    return _typical(np.array(found))


def _typical(
    found: NDArray[np.float64],
) -> tuple[NDArray[np.float64], NDArray[np.float64]]:
    """Return the mean over the stretches that fit well; a turning point in one spoils it."""
    none = np.zeros(0)
    if len(found) < 6:
        return none, none
    good = found[found[:, 0] < 1.5 * np.quantile(found[:, 0], 0.4), 1:]
    if len(good) < 4:
        return none, none
    middle = np.median(good, axis=0)
    spread = 1.4826 * np.median(np.abs(good - middle), axis=0) + 1e-6
    near = np.all(np.abs(good - middle) < 3.5 * spread, axis=1)
    good = good[near] if near.sum() >= 4 else good
    # neighbouring stretches share two passes of three: so many are independent
    independent = max(len(good) / _PASSES, 1.0)
    return good.mean(axis=0), good.std(axis=0, ddof=1) / math.sqrt(independent)
