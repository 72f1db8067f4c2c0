"""The rate behind time stamps as people would write it."""

import math

import numpy as np
from numpy.typing import NDArray

from firmware_bridge.steady_rate import StepFit

__all__ = ["pleasing_rate_hz"]


def pleasing_rate_hz(fit: StepFit, stamps: NDArray[np.float64], index: NDArray[np.int64]) -> float:
    """Return the rate, as the number of fewest digits that the stamps do not tell from the fit.

    Parameters
    ----------
    fit : StepFit
        The fit of the stamps.
    stamps : ndarray, shape (n,)
        Time stamps [s].
    index : ndarray, shape (n,)
        Their places.

    Returns
    -------
    float
        The rate [Hz]; exactly the rate that made the stamps where they are ``index / rate``
        unrounded.
    """
    rate = 1.0 / fit.step_s
    u = fit.step_u_s * rate**2
    tolerance = max(1e-13 * rate, u if fit.is_rounding else 0.05 * u)
    digits = range(1, 18)
    nice = (value for d in digits for value in (_rounded(rate, d), 1 / _rounded(fit.step_s, d)))
    best = next((value for value in nice if abs(value - rate) <= tolerance), rate)
    return _maybe_exact(best, stamps, index) or best


def _rounded(value: float, digits: int) -> float:
    return float(f"{value:.{digits - 1}e}")


def _maybe_exact(
    rate: float, stamps: NDArray[np.float64], index: NDArray[np.int64]
) -> float | None:
    """Return the rate with ``stamps == places / rate`` in every bit, if there is one."""
    start = round(float(stamps[0]) * rate)
    places = index - index[0] + start
    if places[-1] <= 0 or abs(float(places[-1]) / rate - float(stamps[-1])) > 0.5 / rate:
        return None
    near = float(places[-1]) / float(stamps[-1])
    ulp = math.ulp(near)
    for candidate in (rate, *(near + k * ulp for k in (0, 1, -1, 2, -2))):
        if np.array_equal(places / candidate, stamps):
            return candidate
    return None
