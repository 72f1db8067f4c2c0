"""Results in standard deviations from what the earlier ones foretell, without a baseline first.

Each result is compared with the regression of all before it, divided by their scatter and turned from
Student's distribution to the normal one: on a steady process these are independent, normal and of
width one from the beginning, so that run lengths hold although mean, scatter and, where it is fitted,
the temperature coefficient come from the very results.

References
----------
D. M. Hawkins, *Self-starting CUSUM charts for location and scale*, The Statistician 36 (1987) 299-315.
R. L. Brown, J. Durbin and J. M. Evans, *Techniques for testing the constancy of regression
relationships over time*, J. R. Statist. Soc. B 37 (1975) 149-192 (recursive residuals).
"""

import math
from statistics import NormalDist
from typing import TYPE_CHECKING

import numpy as np

from metro.kernel.student import incomplete_beta

if TYPE_CHECKING:
    from numpy.typing import NDArray

__all__ = ["SelfStarting"]

_DIFFUSE = 1e10  # prior variance over σ²: as good as none
_UNKNOWN = 1e4  # a prediction this uncertain, over σ², says nothing yet
_SMALLEST_P = 1e-300
_NORMAL = NormalDist()


class SelfStarting:
    """The regression of all results so far.

    Parameters
    ----------
    regressors : int
        How many beside the mean.
    """

    def __init__(self, regressors: int = 0) -> None:
        self._count = 1 + regressors
        self.restart()

    def restart(self) -> None:
        """Forget all results."""
        self._covariance: NDArray[np.float64] = _DIFFUSE * np.eye(self._count)
        self._estimate = np.zeros(self._count)
        self._squares = 0.0
        self.dof = 0
        """Degrees of freedom of the scatter so far."""

    @property
    def sigma(self) -> float:
        """Standard deviation of a result so far, NaN while there is none."""
        return math.sqrt(self._squares / self.dof) if self.dof else math.nan

    def add(
        self, value: float, regressors: tuple[float, ...] = (), variance: float = 0.0
    ) -> float | None:
        """Take a result.

        Parameters
        ----------
        value : float
            The result, minus a rough mean, so that digits are kept.
        regressors : tuple of float
            Their values, near zero and near one in size.
        variance : float
            Of what else is uncertain in this result against the others.

        Returns
        -------
        float or None
            The standardised result; None while too little is known.
        """
        row = np.array([1.0, *regressors])
        spread = self._covariance @ row
        lever = float(row @ spread)
        error = value - float(row @ self._estimate)
        score = self._score(error, lever, variance) if lever < _UNKNOWN else None
        self._estimate = self._estimate + spread * (error / (1.0 + lever))
        self._covariance = self._covariance - np.outer(spread, spread) / (1.0 + lever)
        if lever < _UNKNOWN:
            self._squares += error**2 / (1.0 + lever)
            self.dof += 1
        return score

    def _score(self, error: float, lever: float, variance: float) -> float | None:
        if not self._squares > 0:
            return None
        t = error / math.sqrt(self.sigma**2 * (1.0 + lever) + variance)
        return math.copysign(-_NORMAL.inv_cdf(max(_tail(abs(t), self.dof), _SMALLEST_P)), t)


def _tail(t: float, dof: float) -> float:
    """Return the probability beyond t ≥ 0 on one side, with all its digits."""
    return 0.5 * incomplete_beta(dof / (dof + t * t), 0.5 * dof, 0.5)
