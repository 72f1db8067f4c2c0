"""Student's t: the coverage factor of an expanded uncertainty, with ``math`` only.

The distribution function is a regularised incomplete beta function, evaluated by its continued
fraction (modified Lentz iteration) and inverted by bisection.

References
----------
JCGM 100:2008 (GUM), annex G.3 (the t-distribution), table G.2.
NIST *Digital Library of Mathematical Functions*, 8.17.22 (continued fraction of I_x(a, b)).
"""

import math

__all__ = ["incomplete_beta", "t_quantile", "t_two_sided"]

_TINY = 1e-300  # keeps Lentz's quotients off zero; far below any term of the fraction
_NORMAL_DOF = 1e8  # beyond this t and the normal distribution agree to 1e-8 relative


def incomplete_beta(x: float, a: float, b: float) -> float:
    """Return the regularised incomplete beta function I_x(a, b).

    Parameters
    ----------
    x : float
        Between 0 and 1.
    a, b : float
        Both > 0.

    Returns
    -------
    float
        Between 0 and 1; relative error below 1e-12 for a, b up to 1e4.
    """
    if x <= 0.0:
        return 0.0
    if x >= 1.0:
        return 1.0
    log_front = (
        math.lgamma(a + b) - math.lgamma(a) - math.lgamma(b) + a * math.log(x) + b * _log_of_rest(x)
    )
    # The fraction converges fast only below the mean; above it the mirror image is used.
    if x < (a + 1.0) / (a + b + 2.0):
        return math.exp(log_front) * _beta_fraction(x, a, b) / a
    return 1.0 - math.exp(log_front) * _beta_fraction(1.0 - x, b, a) / b


def _log_of_rest(x: float) -> float:
    """Return ln(1 − x) without losing the digits of a small x; MicroPython has no ``log1p``.

    The error of the rounded 1 − x is divided out again (W. Kahan's device, from memory).
    """
    rest = 1.0 - x
    return -x if rest == 1.0 else math.log(rest) * (x / (1.0 - rest))


def _beta_fraction(x: float, a: float, b: float) -> float:
    c = 1.0
    d = 1.0 - (a + b) * x / (a + 1.0)
    d = 1.0 / (d if abs(d) > _TINY else _TINY)
    result = d
    for m in range(1, 100000):
        for term in (
            m * (b - m) * x / ((a + 2 * m - 1) * (a + 2 * m)),
            -(a + m) * (a + b + m) * x / ((a + 2 * m) * (a + 2 * m + 1)),
        ):
            d = 1.0 + term * d
            d = 1.0 / (d if abs(d) > _TINY else _TINY)
            c = 1.0 + term / c
            c = c if abs(c) > _TINY else _TINY
            step = c * d
            result *= step
        if abs(step - 1.0) < 1e-16:
            break
    return result


def t_two_sided(t: float, dof: float) -> float:
    """Return the probability that a t-distributed value lies within ±t.

    Parameters
    ----------
    t : float
        At least 0.
    dof : float
        Degrees of freedom, > 0; may be infinite.

    Returns
    -------
    float
        Between 0 and 1.
    """
    if dof > _NORMAL_DOF:
        return math.erf(t / math.sqrt(2.0))
    square = t * t
    return incomplete_beta(square / (dof + square), 0.5, 0.5 * dof)


def _lies_below(t: float, p: float, dof: float) -> bool:
    """Whether less than p lies within ±t; beyond t² = dof judged by the tail, which keeps digits."""
    if dof > _NORMAL_DOF:
        return math.erfc(t / math.sqrt(2.0)) > 1.0 - p
    if t * t < dof:
        return t_two_sided(t, dof) < p
    return incomplete_beta(dof / (dof + t * t), 0.5 * dof, 0.5) > 1.0 - p


def t_quantile(p_two_sided: float, dof: float) -> float:
    """Return the t within ±t of which lies the probability p: the coverage factor.

    Parameters
    ----------
    p_two_sided : float
        Coverage probability, 0 < p < 1.
    dof : float
        Degrees of freedom, > 0; need not be whole; may be infinite.

    Returns
    -------
    float
        Coverage factor k, relative error below 1e-9.

    Raises
    ------
    ValueError
        If p or dof is out of range.
    """
    if not 0.0 < p_two_sided < 1.0:
        raise ValueError("p_two_sided must be > 0 and < 1, got " + repr(p_two_sided))
    if not dof > 0.0:
        raise ValueError("dof must be > 0, got " + repr(dof))
    low = 0.0
    high = 1.0
    while _lies_below(high, p_two_sided, dof):
        low = high
        high *= 2.0
        if high > 1e150:  # its square must stay a float
            return math.inf
    for _ in range(200):
        middle = 0.5 * (low + high)
        if middle in (low, high):
            break
        if _lies_below(middle, p_two_sided, dof):
            low = middle
        else:
            high = middle
    return 0.5 * (low + high)
