"""Whether rows of numbers go on after a line that is none of them."""

import numpy as np
from numpy.typing import NDArray

__all__ = ["goes_on"]

_ROWS = 20  # rows before the line that tell the usual step of a column
_LOST = 3.0  # usual steps that may be missing at the line


def goes_on(values: NDArray[np.float64], row: int) -> bool:
    """Tell whether a column that counts on regularly does so over the place of a stray line.

    Parameters
    ----------
    values : ndarray, shape (n, columns)
        Rows, NaN where a value is missing.
    row : int
        The row before which the stray line stands.

    Returns
    -------
    bool
        False where no column counts on: the line may as well be the header of another section.
    """
    before, after = values[max(0, row - _ROWS) : row], values[row : row + _ROWS]
    return any(_counts_on(before[:, k], after[:, k]) for k in range(values.shape[1]))


def _counts_on(before: NDArray[np.float64], after: NDArray[np.float64]) -> bool:
    there, follow = np.flatnonzero(np.isfinite(before)), np.flatnonzero(np.isfinite(after))
    if there.size < 3 or not follow.size:
        return False
    steps = np.diff(before[there])
    usual = float(np.median(steps))
    # A quarter of the steps may be odd: stamps that are rounded, late or lost.
    regular = np.abs(steps - usual) <= 0.5 * abs(usual)
    if usual == 0.0 or np.mean(regular) < 0.75:
        return False
    rows = before.size - there[-1] + follow[0]
    step = float(after[follow[0]] - before[there[-1]]) / usual
    return bool(0.5 < step <= rows + _LOST)
