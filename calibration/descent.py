"""The descent: Levenberg–Marquardt steps to the nearest least squares of a driven fringe."""

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from calibration.fringe_model import FringeModel

__all__ = ["Prior", "descend"]


@dataclass(frozen=True)
class Prior:
    """What is known beforehand of offset and half span: values, information, and what is fixed."""

    value: NDArray[np.float64]
    information: NDArray[np.float64]
    fixed: bool


def _free(model: FringeModel, prior: Prior | None) -> NDArray[np.bool_]:
    """Return which parameters are free."""
    free = np.ones(model.size, dtype=bool)
    if prior is not None:
        free[:2] = False
    return free


def _step(
    matrix: NDArray[np.float64],
    gradient: NDArray[np.float64],
    free: NDArray[np.bool_],
    damping: float,
) -> NDArray[np.float64]:
    """Return the damped step in the free parameters."""
    step = np.zeros(len(gradient))
    part = matrix[np.ix_(free, free)]
    size = np.sqrt(np.maximum(np.diag(part), 1e-300))
    scaled = part / np.outer(size, size)
    scaled[np.diag_indices_from(scaled)] += damping + 1e-13
    step[free] = np.linalg.solve(scaled, gradient[free] / size) / size
    return step


def descend(
    model: FringeModel,
    theta: NDArray[np.float64],
    prior: Prior | None,
    rounds: int = 40,
) -> tuple[NDArray[np.float64], float]:
    """Return the nearest minimum of Σr² and its value.

    Parameters
    ----------
    model : FringeModel
        Record and lines.
    theta : ndarray, shape (n_parameters,)
        Start.
    prior : Prior or None
        Extremes, held fixed where given: freeing them is for the finish, which weighs them against
        the noise.
    rounds : int, optional
        Most iterations.

    Returns
    -------
    ndarray, shape (n_parameters,)
        Parameters at the minimum.
    float
        Σr² there.
    """
    free = _free(model, prior)
    sums = model.sums(theta)
    damping = 1e-3
    for _ in range(rounds):
        for _ in range(10):  # damp until the sum of squares falls
            step = _step(sums.matrix, sums.gradient, free, damping)
            trial = theta + step
            squares = model.squares(trial)
            if squares < sums.squares:
                break
            damping = max(damping * 8.0, 1e-6)
        else:
            break
        expected = float(step @ sums.gradient)
        theta, damping = trial, damping / 8.0
        before, sums = sums.squares, model.sums(theta)
        if expected < 1e-6 * sums.squares / max(sums.count, 1) or before - squares < 1e-13 * before:
            break
    return theta, sums.squares
