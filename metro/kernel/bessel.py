"""Bessel functions of the first kind and integer order, from nothing but arithmetic.

A sinusoidal phase of depth m spreads over the harmonics as J0(m), J1(m) …

References
----------
M. Abramowitz and I. A. Stegun, *Handbook of Mathematical Functions*, 1964, 9.1.10 (series), 9.1.46
(sum rule), section 9.12 example 1 (recurrence run backwards).
"""

__all__ = ["bessel", "bessels", "jinc"]


def bessel(order: int, x: float) -> float:
    """Return the Bessel function of the first kind of integer order.

    Parameters
    ----------
    order : int
        Order n, 0 or above.
    x : float
        Argument.

    Returns
    -------
    float
        J_n(x); the error is a few 1e-16 for |x| up to 1000.
    """
    return bessels(order, x)[order]


def bessels(highest: int, x: float) -> list[float]:
    """Return J_0(x) … J_highest(x).

    Parameters
    ----------
    highest : int
        Highest order wanted, 0 or above.
    x : float
        Argument.

    Returns
    -------
    list of float
        ``highest`` + 1 values.
    """
    size = abs(x)
    values = (
        [_series(n, size) for n in range(highest + 1)] if size < 2.0 else _backward(highest, size)
    )
    if x < 0.0:
        values = [-v if n % 2 else v for n, v in enumerate(values)]
    return values


def jinc(x: float) -> float:
    """Return 2·J1(x)/x, and 1 at x = 0.

    Parameters
    ----------
    x : float
        Argument.

    Returns
    -------
    float
        How much of a line's small-signal response is left at depth x.
    """
    return 2.0 * bessel(1, x) / x if abs(x) > 1e-8 else 1.0


def _series(order: int, x: float) -> float:
    """Return J_n(x) from its power series; below x = 2 nothing cancels."""
    half = 0.5 * x
    term = 1.0
    for k in range(1, order + 1):
        term *= half / k
    total = term
    k = 0
    while abs(term) > 1e-17 * abs(total):
        k += 1
        term *= -half * half / (k * (k + order))
        total += term
    return total


def _backward(highest: int, x: float) -> list[float]:
    """Return J_0 … J_highest by Miller's backward recurrence, scaled by J0 + 2ΣJ_2k = 1."""
    # Upwards the recurrence amplifies rounding once n > x; downwards it damps any wrong start.
    # From x + 9·x^(1/3) + 25 orders up, J_n is below 1e-17 of the largest for x up to 1e4.
    start = int(max(x, highest) + 9.0 * x ** (1.0 / 3.0) + 25.0)
    start += start % 2
    values = [0.0] * (highest + 1)
    above, here, total = 0.0, 1e-30, 0.0  # within single precision
    for n in range(start, 0, -1):
        above, here = here, 2.0 * n / x * here - above
        if n - 1 <= highest:
            values[n - 1] = here
        if (n - 1) % 2 == 0:
            total += here if n == 1 else 2.0 * here
        if abs(here) > 1e20:
            above, here, total = above * 1e-20, here * 1e-20, total * 1e-20
            values = [v * 1e-20 for v in values]
    return [v / total for v in values]
