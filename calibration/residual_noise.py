"""The residual's noise: its autocovariance and the short filter that makes it white."""

import numpy as np
from numpy.typing import NDArray

from calibration.fringe_model import FringeModel

__all__ = ["whitening_filter"]

_HIGHEST_ORDER = 24


def _autocovariance(
    model: FringeModel, theta: NDArray[np.float64], order: int
) -> tuple[NDArray[np.float64], int]:
    """Return the residual's autocovariance at lags 0 … order and the samples in it."""
    sums, count = np.zeros(order + 1), 0
    for start, stop in model.chunks(order):
        rest = np.nan_to_num(model.residual(theta, start, stop))
        lead = min(order, start + order if start else 0)
        fresh = rest[lead:]
        for lag in range(order + 1):
            early = rest[max(lead - lag, 0) : len(rest) - lag]
            sums[lag] += float(np.einsum("i,i->", early, rest[max(lag, lead) :]))
        count += len(fresh)
    return sums, count


def whitening_filter(model: FringeModel, theta: NDArray[np.float64]) -> NDArray[np.float64]:
    """Return the prediction-error filter of a fit's residuals.

    Parameters
    ----------
    model : FringeModel
        The whole record in order, NaN where samples are missing.
    theta : ndarray, shape (n_parameters,)
        Fitted parameters.

    Returns
    -------
    ndarray, shape (order + 1,)
        First weight 1; just ``[1.0]`` for white residuals.

    Notes
    -----
    Levinson–Durbin on the autocovariances, which keeps the filter stable; the order by Akaike's
    criterion, at most 24 and at most a fortieth of the samples.
    """
    order = min(_HIGHEST_ORDER, len(model.values) // 40)
    sums, count = _autocovariance(model, theta, order)
    if sums[0] <= 0.0:
        return np.ones(1)
    weights, error = np.ones(1), sums[0]
    best, choice = count * np.log(error), weights
    for step in range(1, order + 1):
        reflection = -float(weights @ sums[step:0:-1][: len(weights)]) / error
        padded = np.concatenate([weights, [0.0]])
        weights = padded + reflection * padded[::-1]
        error *= max(1.0 - reflection**2, 1e-15)
        criterion = count * np.log(error) + 2.0 * step + 4.0
        if criterion < best:
            best, choice = criterion, weights
    return np.asarray(choice)
