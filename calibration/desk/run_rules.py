"""Run rules: patterns of points that chance seldom makes. They inform; they raise no alarm.

All together they call a steady process odd about once in ninety points, so that over a month of
hourly results some are expected: alarms come from the cumulative sums instead.

References
----------
NIST/SEMATECH *e-Handbook of Statistical Methods*, 6.3.2 (the rules of Western Electric, and the two
on trends).
D. J. Wheeler and D. S. Chambers, *Understanding Statistical Process Control* (the same rules).
"""

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

__all__ = ["RuleHit", "run_rules"]

FloatArray = NDArray[np.float64]


@dataclass(frozen=True, slots=True)
class RuleHit:
    """A pattern that was met.

    Parameters
    ----------
    rule : str
        What it is, in words.
    point : int
        The point that completes it, from 0.
    """

    rule: str
    point: int


def run_rules(points: FloatArray, centre: float, sigma: float) -> list[RuleHit]:
    """Return the patterns in a row of points, in the order of time.

    Parameters
    ----------
    points : ndarray, shape (n,)
        In the order of time.
    centre, sigma : float
        Centre line and standard deviation of a point; sigma > 0.

    Returns
    -------
    list of RuleHit
        A pattern that goes on is told once, where it is completed.
    """
    z = (points - centre) / sigma
    met = {
        "one beyond 3 sigma": _either(z, 3.0, 1, 1),
        "two of three beyond 2 sigma on one side": _either(z, 2.0, 2, 3),
        "four of five beyond 1 sigma on one side": _either(z, 1.0, 4, 5),
        "eight in a row on one side": _either(z, 0.0, 8, 8),
        "six in a row steadily up or down": _trend(z, 6),
        "fourteen in a row up and down in turn": _alternating(z, 14),
    }
    hits = [RuleHit(rule, int(k)) for rule, where in met.items() for k in _beginnings(where)]
    return sorted(hits, key=lambda hit: hit.point)


def _either(z: FloatArray, limit: float, count: int, of: int) -> NDArray[np.bool_]:
    return _counted(z > limit, count, of) | _counted(z < -limit, count, of)


def _counted(is_beyond: NDArray[np.bool_], count: int, of: int) -> NDArray[np.bool_]:
    """Return where a point is beyond and at least ``count`` of the last ``of`` are."""
    total = np.concatenate([np.zeros(of, dtype=np.int64), np.cumsum(is_beyond)])
    met: NDArray[np.bool_] = is_beyond & (total[of:] - total[:-of] >= count)
    return met


def _trend(z: FloatArray, length: int) -> NDArray[np.bool_]:
    """Return where ``length`` points in a row rise, or fall."""
    steps = np.diff(z, prepend=np.nan)
    return _counted(steps > 0, length - 1, length - 1) | _counted(steps < 0, length - 1, length - 1)


def _alternating(z: FloatArray, length: int) -> NDArray[np.bool_]:
    """Return where each of ``length`` points lies on the other side of the one before than the last."""
    steps = np.diff(z, prepend=np.nan)
    turns = np.concatenate([[False], steps[1:] * steps[:-1] < 0])[: len(z)]
    return _counted(turns, length - 2, length - 2)


def _beginnings(where: NDArray[np.bool_]) -> NDArray[np.intp]:
    return np.flatnonzero(where & ~np.concatenate([[False], where[:-1]]))
