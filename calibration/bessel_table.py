"""The Bessel table: J0, J1, … on a grid of depths, for searching a depth by its harmonics."""

import math
from functools import lru_cache

import numpy as np
from numpy.typing import NDArray

__all__ = ["bessel_rows", "bessel_table"]


def bessel_rows(depths: NDArray[np.float64], highest: int) -> NDArray[np.float64]:
    """Return the Bessel functions of the first kind at many depths.

    Parameters
    ----------
    depths : ndarray, shape (n,)
        Arguments, ≥ 0 [rad].
    highest : int
        Highest order.

    Returns
    -------
    ndarray, shape (n, highest + 1)
        J_k(depth), absolute error below 1e-13.

    Notes
    -----
    The harmonics of exp(i m cos u) = Σ i^k J_k(m) e^{iku} (Jacobi–Anger), read off by a Fourier
    transform over one turn with points enough that no order folds back: J_k(m) < 1e-16 for
    k > m + 12·m^(1/3) + 20.
    """
    most = float(depths.max(initial=0.0))
    reach = max(most + 12.0 * most ** (1.0 / 3.0) + 20.0, float(highest))
    points = 1 << math.ceil(math.log2(2.0 * reach + 2.0))
    turn = np.cos(2.0 * np.pi * np.arange(points) / points)
    unit = np.array([1, -1j, -1, 1j])[np.arange(highest + 1) % 4]
    rows = np.empty((len(depths), highest + 1))
    for start in range(0, len(depths), 256):  # 256 rows at a time bound the memory
        part = depths[start : start + 256]
        spectrum = np.fft.fft(np.exp(1j * np.outer(part, turn)), axis=1) / points
        rows[start : start + 256] = (spectrum[:, : highest + 1] * unit).real
    return rows


@lru_cache(maxsize=4)
def bessel_table(
    deepest: int, highest: int, step: float = 0.15
) -> tuple[NDArray[np.float64], NDArray[np.float64]]:
    """Return a grid of depths and the Bessel functions on it, kept for the next call.

    Parameters
    ----------
    deepest : int
        Greatest depth [rad].
    highest : int
        Highest order.
    step : float, optional
        Spacing of the depths [rad].

    Returns
    -------
    ndarray, shape (n,)
        Depths from ``step`` to ``deepest`` [rad].
    ndarray, shape (n, highest + 1)
        J_k at each depth.
    """
    depths = np.asarray(step * np.arange(1, max(int(deepest / step), 1) + 1))
    return depths, bessel_rows(depths, highest)
