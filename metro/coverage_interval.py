"""Coverage intervals from draws of a quantity, and the numerical tolerance of an uncertainty.

References
----------
JCGM 101:2008 (GUM Supplement 1), 7.7 (intervals), 7.9.2 (numerical tolerance).
"""

from __future__ import annotations

import math
from typing import TYPE_CHECKING

from metro.errors import MetroError

if TYPE_CHECKING:
    import numpy as np
    from numpy.typing import NDArray

__all__ = ["numerical_tolerance", "shortest", "symmetric"]


def symmetric(ordered: NDArray[np.float64], p: float = 0.95) -> tuple[float, float]:
    """Return the probabilistically symmetric coverage interval.

    Parameters
    ----------
    ordered : ndarray, shape (n,)
        Draws in ascending order.
    p : float
        Coverage probability, between 0 and 1.

    Returns
    -------
    tuple of (float, float)
        End points that leave (1 − p)/2 of the draws on either side.

    Raises
    ------
    MetroError
        If p is none or there are too few draws for it.
    """
    inside = _inside(ordered.size, p)
    first = (ordered.size - inside) // 2
    return float(ordered[first]), float(ordered[min(first + inside, ordered.size - 1)])


def shortest(ordered: NDArray[np.float64], p: float = 0.95) -> tuple[float, float]:
    """Return the shortest coverage interval.

    Parameters
    ----------
    ordered : ndarray, shape (n,)
        Draws in ascending order.
    p : float
        Coverage probability, between 0 and 1.

    Returns
    -------
    tuple of (float, float)
        The closest end points with p of the draws between them; its end points scatter more than
        those of the symmetric one.

    Raises
    ------
    MetroError
        If p is none or there are too few draws for it.
    """
    inside = _inside(ordered.size, p)
    first = int((ordered[inside:] - ordered[:-inside]).argmin())
    return float(ordered[first]), float(ordered[first + inside])


def _inside(count: int, p: float) -> int:
    if not 0.0 < p < 1.0:
        raise MetroError(f"p must be > 0 and < 1, got {p!r}")
    inside = math.floor(p * count + 0.5)
    if not 0 < inside < count:
        raise MetroError(f"{count} draws are too few for an interval of probability {p:g}")
    return inside


def numerical_tolerance(u: float, digits: int = 2) -> float:
    """Return the numerical tolerance δ of a standard uncertainty.

    Parameters
    ----------
    u : float
        Standard uncertainty; > 0.
    digits : int
        Significant digits of u that are meant, 1 or 2 as a rule.

    Returns
    -------
    float
        ½·10^l where u = c·10^l and the integer c has this many digits; in the unit of u.

    Raises
    ------
    MetroError
        If u is not positive.
    """
    if not (u > 0.0 and math.isfinite(u)):
        raise MetroError(f"u must be finite and > 0, got {u!r}")
    _, _, exponent = f"{u:.{digits - 1}e}".partition("e")
    return 0.5 * 10.0 ** (int(exponent) - digits + 1)
