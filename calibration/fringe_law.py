"""The fringe law's harmonics: whether a scanned fringe is a cosine.

A ghost beam, feedback, saturation or clipping adds cos 2φ, cos 3φ … to the law. They are read from
stretches of one and a half fringes, each with its own smooth motion, so that neither the motion of
the scan nor its turning points need be known; what shakes the mirror averages out over stretches.
"""

import math

import numpy as np
from numpy.typing import NDArray

from metro.kernel.student import t_quantile

__all__ = ["law_harmonics", "law_stretches", "student_width", "typical_law"]

_PASSES = 3
_POINTS = 300
_MOST = 120  # stretches looked at in a long scan
_ORDERS = np.arange(4)
_MOTION = 4  # terms of a cubic


def _waves(phase: NDArray[np.float64]) -> NDArray[np.float64]:
    """Return 1, cos φ, cos 2φ, cos 3φ and sin 2φ, shape (n, 5)."""
    return np.hstack([np.cos(np.outer(phase, _ORDERS)), np.sin(2.0 * phase)[:, None]])


def _slope(phase: NDArray[np.float64], size: NDArray[np.float64]) -> NDArray[np.float64]:
    """Return the law's derivative by the phase."""
    cosines = -np.sin(np.outer(phase, _ORDERS)) @ (_ORDERS * size[:4])
    return np.asarray(cosines + 2.0 * size[4] * np.cos(2.0 * phase))


def _stretch(
    values: NDArray[np.float64],
    time: NDArray[np.float64],
    begins_high: bool,  # private
    leaning: bool,
) -> tuple[float, NDArray[np.float64]]:
    """Fit the law with φ a cubic in time; return the residual's rms, cos 2φ, cos 3φ and sin 2φ.

    The law is d + b·cos φ + h₂·cos 2φ + h₃·cos 3φ + l·sin 2φ: d and b are free because shaking within
    the stretch takes from the cosine.
    """
    middle = (
        math.pi if begins_high else 2.0 * math.pi
    )  # half-way through the second of three passes
    powers = np.stack([np.ones_like(time), time, time**2, time**3], axis=1)
    theta = kept = np.array([middle, 1.5 * math.pi, 0.0, 0.0, 0.0, 1.0, 0.0, 0.0, 0.0])
    rest, damping = np.inf, 1e-2
    matrix, right = np.eye(len(theta)), np.zeros(len(theta))
    for _ in range(25):
        phase = powers @ theta[:_MOTION]
        waves = _waves(phase)
        error = values - waves @ theta[_MOTION:]
        now = float(np.sqrt(np.mean(error**2)))
        if now > rest * 1.001:
            theta, damping = kept, damping * 8.0
        else:
            done = rest - now < 1e-6 * now
            rest, kept, damping = now, theta, damping / 4.0
            columns = np.hstack([powers * _slope(phase, theta[_MOTION:])[:, None], waves])
            columns[:, -1] *= leaning  # a column of zeros stays at zero
            matrix, right = columns.T @ columns, columns.T @ error
            if done:
                break
        lifted = matrix + damping * np.diag(np.diag(matrix)) + 1e-9 * np.eye(9) * len(time)
        theta = kept + np.linalg.solve(lifted, right)
    return rest, kept[_MOTION + 2 :] / max(abs(kept[_MOTION + 1]), 0.1)


def law_stretches(
    values: NDArray[np.float64],
    passes: NDArray[np.int64],
    low: float,
    high: float,
    *,
    leaning: bool = True,
) -> NDArray[np.float64]:
    """Return the harmonics of the fringe law in stretches of one and a half fringes.

    Parameters
    ----------
    values : ndarray, shape (n,)
        Scan over whole fringes, no NaN.
    passes : ndarray of int, shape (n,)
        Number of the pass over an extreme that each sample belongs to.
    low, high : float
        Extremes, in the scan's unit.
    leaning : bool, optional
        Whether sin 2φ is fitted; without it the others are known better.

    Returns
    -------
    ndarray, shape (k, 6)
        Of each stretch: first sample, end, residual's rms over the half span, then cos 2φ, cos 3φ and
        sin 2φ relative to cos φ. φ grows in time: a law that leans in φ changes the sign of sin 2φ
        with the direction of the motion.
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
        rest, share = _stretch(level[place], time, top, leaning)
        found.append([first, last, rest, *share.tolist()])
    return np.array(found).reshape(-1, 6)


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
    typical, u, _ = typical_law(law_stretches(values, passes, low, high, leaning=False))
    return typical[:2], u[:2]


def typical_law(
    stretches: NDArray[np.float64],
) -> tuple[NDArray[np.float64], NDArray[np.float64], int]:
    """Return the mean over the stretches that fit well; a turning point in one spoils it.

    Parameters
    ----------
    stretches : ndarray, shape (k, 6)
        As from `law_stretches`.

    Returns
    -------
    ndarray, shape (3,) or (0,)
        cos 2φ, cos 3φ and sin 2φ relative to cos φ; empty with fewer than four usable stretches.
    ndarray, shape (3,) or (0,)
        Their standard uncertainties, from the scatter between stretches.
    int
        Stretches that fit well.
    """
    none = np.zeros(0)
    if len(stretches) < 6:
        return none, none, 0
    rest = stretches[:, 2]
    good = stretches[rest < 1.5 * np.quantile(rest, 0.4), 3:]
    if len(good) < 4:
        return none, none, len(good)
    middle = np.median(good, axis=0)
    spread = 1.4826 * np.median(np.abs(good - middle), axis=0) + 1e-6
    near = np.all(np.abs(good - middle) < 3.5 * spread, axis=1)
    good = good[near] if near.sum() >= 4 else good
    # neighbouring stretches share two passes of three: so many are independent
    independent = max(len(good) / _PASSES, 1.0)
    return good.mean(axis=0), good.std(axis=0, ddof=1) / math.sqrt(independent), len(good)


def student_width(stretches: int) -> float:
    """Return by how much an interval at 95 % is wider since few stretches know their own scatter.

    Parameters
    ----------
    stretches : int
        Of three passes each, of which neighbours share two.

    Returns
    -------
    float
        1 for many; Student's factor over the normal one.
    """
    dof = max(stretches / _PASSES - 1.0, 1.0)
    return t_quantile(0.95, dof) / t_quantile(0.95, 1e6)
