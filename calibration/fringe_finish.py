"""The finish: a driven fringe's fit on the whole record, weighted by its own noise."""

import numpy as np
from numpy.typing import NDArray

from calibration.descent import Prior, descend
from calibration.fringe_model import FringeModel, Sums
from calibration.fringe_search import Found
from calibration.residual_colour import colour_of
from calibration.residual_noise import whitening_filter

__all__ = ["finish"]

_CLOCK_GAIN = 12.0


def _on_all(values: NDArray[np.float64], found: Found) -> FringeModel:
    """Return the found model on every sample of the record's grid."""
    old = found.model
    return FringeModel(values, np.arange(len(values)), len(values), old.turns, old.pieces)


def _with_clock(
    model: FringeModel, theta: NDArray[np.float64], squares: float, prior: Prior | None
) -> tuple[FringeModel, NDArray[np.float64], float]:
    """Return the fit with the lines' common frequency error where that fits clearly better."""
    other = FringeModel(
        model.values, model.index, model.length, model.turns, model.pieces, clock=True
    )
    start = np.insert(theta, model.fixed, 0.0)
    moved, less = descend(other, start, prior, rounds=8)
    floor = 1e-26 * float(np.nansum(model.values**2))
    count = np.count_nonzero(np.isfinite(model.values))
    if count * np.log((squares + floor) / (less + floor)) > _CLOCK_GAIN:
        return other, moved, less
    return model, theta, squares


def _solved(
    matrix: NDArray[np.float64], right: NDArray[np.float64], free: NDArray[np.bool_]
) -> NDArray[np.float64]:
    """Solve the normal equations in the free parameters; zero elsewhere."""
    out = np.zeros((len(matrix), *right.shape[1:]))
    part = matrix[np.ix_(free, free)]
    size = np.sqrt(np.maximum(np.diag(part), 1e-300))
    scaled = part / np.outer(size, size)
    scaled[np.diag_indices_from(scaled)] += 1e-14
    rest = right[free] / (size if right.ndim == 1 else size[:, None])
    solved = np.linalg.solve(scaled, rest)
    out[free] = solved / (size if right.ndim == 1 else size[:, None])
    return out


def _informed(sums: Sums, variance: float, prior: Prior | None) -> NDArray[np.float64]:
    """Return Σ j jᵀ/σ² plus what was known."""
    matrix = sums.matrix / variance
    if prior is not None and not prior.fixed:
        matrix[:2, :2] += prior.information
    return matrix


def _covariance(
    model: FringeModel,
    theta: NDArray[np.float64],
    whitening: NDArray[np.float64],
    prior: Prior | None,
    free: NDArray[np.bool_],
    values: NDArray[np.float64],
) -> tuple[NDArray[np.float64], float]:
    """Return the covariance by unequal and coloured residuals, with what was known, and its dof."""
    sums = model.sums(theta, whitening, scatter=True)
    variance = _variance(sums, free, values)
    inverse = _solved(_informed(sums, variance, prior), np.eye(model.size), free)
    many = sums.count > 50 * model.size
    spread = sums.scatter / variance**2 if many else sums.matrix / variance
    colour, dof = colour_of(model, theta, whitening, inverse)
    covariance = inverse @ spread @ inverse.T * np.multiply.outer(colour, colour)
    if prior is not None and not prior.fixed:
        covariance += inverse[:, :2] @ prior.information @ inverse[:, :2].T
    own_dof = float(max(sums.count - int(free.sum()) - len(whitening) + 1, 1))
    return (covariance + covariance.T) / 2, min(own_dof, dof)


def finish(values: NDArray[np.float64], found: Found, prior: Prior | None) -> Found:
    """Fit the whole record, residuals and derivatives whitened by the same short filter.

    Parameters
    ----------
    values : ndarray, shape (n,)
        Record; NaN where samples are missing.
    found : Found
        Minimum on the thinned record.
    prior : Prior or None
        What is known of the extremes.

    Returns
    -------
    Found
        With covariance (residuals' colour and unequal size, and the given extremes' u, included)
        and degrees of freedom.
    """
    model = _on_all(values, found)
    theta, squares = descend(model, found.theta, prior, rounds=12)
    model, theta, squares = _with_clock(model, theta, squares, prior)
    free = np.ones(model.size, dtype=bool)
    free[:2] = prior is None or not prior.fixed
    whitening = whitening_filter(model, theta)
    plain = theta
    for _ in range(12):
        if model.squares(theta) > 4.0 * squares:  # left the minimum: the plain fit stands
            theta = plain
            break
        sums = model.sums(theta, whitening)
        variance = _variance(sums, free, values)
        matrix = _informed(sums, variance, prior)
        right = sums.gradient / variance
        if prior is not None and not prior.fixed:
            right[:2] += prior.information @ (prior.value - theta[:2])
        step = _solved(matrix, right, free)
        theta = theta + step
        if float(step @ matrix @ step) < 1e-6:
            break
    covariance, dof = _covariance(model, theta, whitening, prior, free, values)
    return Found(model, theta, model.squares(theta), covariance, dof, whitening)


def _variance(sums: Sums, free: NDArray[np.bool_], values: NDArray[np.float64]) -> float:
    """Return the whitened residuals' variance, not below the arithmetic's own rounding."""
    rounding = (1e-15 * float(np.nanmax(np.abs(values)))) ** 2
    return max(sums.squares / max(sums.count - int(free.sum()), 1), rounding, 1e-300)
