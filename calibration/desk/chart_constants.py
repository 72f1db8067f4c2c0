"""Constants of control charts for normal data: d2, d3, c4 and the factors of limits made of them.

The mean range of n normal values is d2·σ and its standard deviation d3·σ; the mean of their sample
standard deviation is c4·σ. Ranges come from numerical integrals, c4 from the gamma function.

References
----------
NIST/SEMATECH *e-Handbook of Statistical Methods*, 6.3.2.1 (X-bar, R and s charts).
L. H. C. Tippett, *On the extreme individuals and the range of samples taken from a normal
population*, Biometrika 17 (1925) 364-387 (the mean range).
"""

import math
from functools import cache

import numpy as np

__all__ = ["a2", "a3", "b3", "b4", "c4", "d2", "d3", "d4_factor", "e2", "lower_range_factor"]

_REACH = 8.5  # standard deviations: beyond, the normal distribution holds less than 1e-17
_STEPS = 1201


def c4(n: int) -> float:
    """Return the mean of the sample standard deviation over σ.

    Parameters
    ----------
    n : int
        Values a sample, ≥ 2.

    Returns
    -------
    float
        √(2/(n−1))·Γ(n/2)/Γ((n−1)/2).
    """
    return math.sqrt(2.0 / (n - 1)) * math.exp(math.lgamma(n / 2) - math.lgamma((n - 1) / 2))


@cache
def d2(n: int) -> float:
    """Return the mean range over σ.

    Parameters
    ----------
    n : int
        Values a sample, ≥ 2.

    Returns
    -------
    float
        ∫ (1 − Φ(x)ⁿ − (1 − Φ(x))ⁿ) dx.
    """
    x, phi = _normal()
    return float(np.trapezoid(1.0 - phi**n - (1.0 - phi) ** n, x))


@cache
def d3(n: int) -> float:
    """Return the standard deviation of the range over σ.

    Parameters
    ----------
    n : int
        Values a sample, ≥ 2.

    Returns
    -------
    float
        From E[R²] = 2∬ over x < y of (1 − Φ(y)ⁿ − (1 − Φ(x))ⁿ + (Φ(y) − Φ(x))ⁿ).
    """
    x, phi = _normal()
    step = x[1] - x[0]
    low, high = phi[:, None], phi[None, :]
    inner = 1.0 - high**n - (1.0 - low) ** n + np.clip(high - low, 0.0, None) ** n
    upper = np.triu(inner)
    upper[np.diag_indices_from(upper)] *= 0.5  # the trapezoidal rule at the edge of the triangle
    return math.sqrt(2.0 * float(upper.sum()) * step**2 - d2(n) ** 2)


@cache
def _normal() -> "tuple[np.ndarray, np.ndarray]":
    x = np.linspace(-_REACH, _REACH, _STEPS)
    return x, np.array([0.5 * math.erfc(-value / math.sqrt(2.0)) for value in x])


def e2(n: int = 2) -> float:
    """Return the factor of the mean moving range in the limits of individual values, 3/d2.

    Parameters
    ----------
    n : int
        Values a moving range.

    Returns
    -------
    float
        2.66 for n = 2.
    """
    return 3.0 / d2(n)


def a2(n: int) -> float:
    """Return the factor of the mean range in the limits of sample means, 3/(d2·√n).

    Parameters
    ----------
    n : int
        Values a sample.

    Returns
    -------
    float
        The factor A2.
    """
    return 3.0 / (d2(n) * math.sqrt(n))


def a3(n: int) -> float:
    """Return the factor of the mean standard deviation in the limits of sample means, 3/(c4·√n).

    Parameters
    ----------
    n : int
        Values a sample.

    Returns
    -------
    float
        The factor A3.
    """
    return 3.0 / (c4(n) * math.sqrt(n))


def lower_range_factor(n: int) -> float:
    """Return the factor D3 of the mean range in its own lower limit, max(0, 1 − 3·d3/d2).

    Parameters
    ----------
    n : int
        Values a sample.

    Returns
    -------
    float
        The factor D3, not to be confused with d3.
    """
    return max(0.0, 1.0 - 3.0 * d3(n) / d2(n))


def d4_factor(n: int) -> float:
    """Return the factor D4 of the mean range in its own upper limit, 1 + 3·d3/d2.

    Parameters
    ----------
    n : int
        Values a sample.

    Returns
    -------
    float
        The factor D4.
    """
    return 1.0 + 3.0 * d3(n) / d2(n)


def b3(n: int) -> float:
    """Return the factor of the mean standard deviation in its own lower limit.

    Parameters
    ----------
    n : int
        Values a sample.

    Returns
    -------
    float
        The factor B3 = max(0, 1 − 3·√(1 − c4²)/c4).
    """
    return max(0.0, 1.0 - 3.0 * math.sqrt(1.0 - c4(n) ** 2) / c4(n))


def b4(n: int) -> float:
    """Return the factor of the mean standard deviation in its own upper limit.

    Parameters
    ----------
    n : int
        Values a sample.

    Returns
    -------
    float
        The factor B4 = 1 + 3·√(1 − c4²)/c4.
    """
    return 1.0 + 3.0 * math.sqrt(1.0 - c4(n) ** 2) / c4(n)
