"""The rate at which results drift, with an uncertainty that allows for results that hang together."""

from dataclasses import dataclass
from math import sqrt
from typing import Any

import numpy as np
from numpy.typing import NDArray

from metro.measured import Measured

__all__ = ["Drift", "drift_of", "lag_one", "widening"]

FloatArray = NDArray[np.float64]

_FEWEST = 4
_DAY_S = 86400.0


@dataclass(frozen=True)
class Drift:
    """A straight line through results over time.

    Parameters
    ----------
    rate : Measured
        Unit of the results a second.
    relative_rate : Measured
        Over the fitted value in the middle of the time [1/s].
    autocorrelation : float
        Of neighbouring residuals, freed of its bias; 0 where none is seen.
    scatter : float
        Rms of the residuals over what the results' own u foretell; NaN without u.
    """

    rate: Measured
    relative_rate: Measured
    autocorrelation: float
    scatter: float

    @property
    def is_significant(self) -> bool:
        """Whether zero lies outside the rate's 95 % interval."""
        u = float(self.rate.u_magnitude) * self.rate.coverage_factor()
        return abs(float(self.rate.magnitude)) > u

    def per_day(self) -> Measured:
        """Return the relative rate a day, dimensionless."""
        rate = self.relative_rate
        return Measured.of(rate.magnitude * _DAY_S, "1", float(rate.u_magnitude) * _DAY_S, rate.dof)

    def to_dict(self) -> dict[str, Any]:
        """Return the JSON form."""
        return {
            "rate": self.rate,
            "relative_rate": self.relative_rate,
            "autocorrelation": self.autocorrelation,
            "scatter": self.scatter,
            "significant": self.is_significant,
        }


def drift_of(
    time_s: FloatArray, values: FloatArray, u: FloatArray | None, unit: str
) -> Drift | None:
    """Return the drift of results by weighted least squares.

    Parameters
    ----------
    time_s : ndarray, shape (n,)
        Moments [s].
    values : ndarray, shape (n,)
        Results.
    u : ndarray, shape (n,), optional
        Their standard uncertainties; all weigh alike without.
    unit : str
        Of the results.

    Returns
    -------
    Drift or None
        None for fewer than four results, or all at one moment.

    Notes
    -----
    The u of the rate comes from the residuals, not from the results' own u alone, and is wider by
    √((1 + r)/(1 − r)) for residuals with the autocorrelation r > 0; the degrees of freedom are those
    of n·(1 − r)/(1 + r) independent results.

    References
    ----------
    G. V. Bayley and J. M. Hammersley, *The "effective" number of independent observations in an
    autocorrelated time series*, Suppl. J. R. Statist. Soc. 8 (1946) 184-197.
    """
    if len(values) < _FEWEST or not np.ptp(time_s) > 0:
        return None
    is_weighted = u is not None and bool(np.all(u > 0)) and bool(np.all(np.isfinite(u)))
    weight = 1.0 / u**2 if is_weighted and u is not None else np.ones_like(values)
    middle = float(np.average(time_s, weights=weight))
    lever = time_s - middle
    mean = float(np.average(values, weights=weight))
    spread = float(np.sum(weight * lever**2))
    rate = float(np.sum(weight * lever * (values - mean))) / spread
    left = (values - mean - rate * lever) * np.sqrt(weight)
    chi = sqrt(float(left @ left) / (len(values) - 2))
    wider, dof = widening(left, 2)
    rate_u = chi * wider / sqrt(spread)
    size = abs(mean) if mean else float("nan")
    return Drift(
        Measured.of(rate, f"{unit}/s" if unit != "1" else "1/s", rate_u, dof),
        Measured.of(rate / size, "1/s", rate_u / size, dof),
        max(0.0, lag_one(left)),
        chi if is_weighted else float("nan"),
    )


def lag_one(residuals: FloatArray) -> float:
    """Return the autocorrelation of neighbours, freed of its bias to first order.

    Parameters
    ----------
    residuals : ndarray, shape (n,)
        Of a fit with a few parameters.

    Returns
    -------
    float
        Below 0.95; 0 for residuals that are all zero.

    References
    ----------
    M. G. Kendall, *Note on bias in the estimation of autocorrelation*, Biometrika 41 (1954) 403-404.
    """
    power = float(residuals @ residuals)
    if not power > 0:
        return 0.0
    r = float(residuals[1:] @ residuals[:-1]) / power
    return min(0.95, r + (1.0 + 4.0 * r) / len(residuals))


def widening(residuals: FloatArray, parameters: int) -> tuple[float, float]:
    """Return by how much residuals that hang together widen a fit's u, and its degrees of freedom.

    Parameters
    ----------
    residuals : ndarray, shape (n,)
        In the order of time.
    parameters : int
        Of the fit.

    Returns
    -------
    tuple of (float, float)
        A factor ≥ 1, and the degrees of freedom, ≥ 1.
    """
    count = len(residuals)
    r = lag_one(residuals)
    if r < 2.0 / sqrt(count):  # not told from none at 95 %
        return 1.0, float(max(1, count - parameters))
    share = (1.0 - r) / (1.0 + r)
    return sqrt(1.0 / share), max(1.0, count * share - parameters)
