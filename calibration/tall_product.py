"""Tall product: many rows, few columns, on one core.

A linear-algebra library hands a product of more than a quarter of a million multiplications to all cores, and
waits for them. For the small products after the block phasors waiting costs more than it gains, most of
all on a machine that has other things to do.
"""

from typing import TypeVar

import numpy as np
from numpy.typing import NDArray

__all__ = ["tall_product"]

_MOST = 1 << 18  # multiplications that OpenBLAS keeps on one core
T = TypeVar("T", np.float64, np.complex128)


def tall_product(left: NDArray[T], right: NDArray[T]) -> NDArray[T]:
    """Return the sum over rows of all products of two tables' columns.

    Parameters
    ----------
    left : ndarray, shape (n, k)
        First table.
    right : ndarray, shape (n, m)
        Second table.

    Returns
    -------
    ndarray, shape (k, m)
        ``left.T @ right``, without conjugation.
    """
    step = max(1, _MOST // max(1, left.shape[1] * right.shape[1]))
    total = left[:step].T @ right[:step]
    for row in range(step, len(left), step):
        total += left[row : row + step].T @ right[row : row + step]
    return np.asarray(total)
