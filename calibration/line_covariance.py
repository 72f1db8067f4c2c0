"""How far the lines of a calibration err together: the covariance between all of them.

Wavelength, drive reading, extremes and whatever else all lines share moves them alike, magnitude and
phase of one cause together; line fits and measured pick-up are each line's own.
"""

from collections.abc import Sequence
from math import sqrt

import numpy as np
from numpy.typing import NDArray

from calibration.actuator_entry import ActuatorEntry
from calibration.term import OWN_TERMS
from metro.budget import Budget

__all__ = ["line_covariance", "own_u"]

FloatArray = NDArray[np.float64]


def line_covariance(entries: Sequence[ActuatorEntry]) -> FloatArray:
    """Return the covariance of the lines' relative magnitudes, then of their phases [rad].

    Parameters
    ----------
    entries : sequence of ActuatorEntry
        The lines; phases count only where every line has one.

    Returns
    -------
    ndarray, shape (2n, 2n), or (n, n) without phases
        In the order of the entries.
    """
    with_phase = all(entry.phase is not None for entry in entries)
    count = len(entries) * (2 if with_phase else 1)
    shared: dict[str, FloatArray] = {}
    own = np.zeros(count)
    for place, entry in enumerate(entries):
        size = float(entry.magnitude.magnitude) or 1.0
        parts = [(place, entry.budget, size)]
        if with_phase:
            parts.append((place + len(entries), entry.phase_budget, 1.0))
        for row, budget, scale in parts:
            for name, effect in _effects(budget, scale):
                if name.startswith(OWN_TERMS):
                    own[row] += effect**2
                else:
                    shared.setdefault(name, np.zeros(count))[row] += effect
    return np.asarray(np.diag(own) + sum(np.outer(e, e) for e in shared.values()))


def own_u(budget: Budget, names: tuple[str, ...] = OWN_TERMS) -> float:
    """Return the u of the terms that are a line's own, in the budget's unit."""
    effects = [c.effect for c in budget.contributions if c.name.startswith(names)]
    return sqrt(sum(effect**2 for effect in effects))


def _effects(budget: Budget, scale: float) -> list[tuple[str, float]]:
    return [(c.name, c.effect / scale) for c in budget.contributions]
