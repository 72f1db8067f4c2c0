"""A table of numbers as a file holds it, before one of its columns is taken for the time."""

from collections.abc import Sequence
from dataclasses import dataclass, field

import numpy as np
from numpy.typing import NDArray

__all__ = ["Table"]


@dataclass(frozen=True, eq=False)
class Table:
    """Columns of numbers with their names and units.

    Parameters
    ----------
    format : str
        "csv", "text", "npy", "npz" or "hdf5".
    columns : sequence of ndarray, shape (n,)
        One array for each column, all of one length; NaN where an entry is missing, infinite
        where it was out of range.
    names : sequence of str
        One a column, empty where the file gives none.
    units : sequence of str
        The words of the file for the units, empty where it gives none.
    resolutions : sequence of float
        The last printed digit of each column, 0 where the file does not round.
    rate_hz : float, optional
        What the file itself states as its rate.
    rate_u_hz : float, optional
        Standard uncertainty of ``rate_hz`` where the file states it.
    gaps : sequence of tuple of (int, int, float)
        First row, length and standard uncertainty of the length, where the file lists its gaps.
    over_range : int
        How many NaN outside the gaps are over-range values, where the file states it.
    unread : int
        Rows of the file that are not in the columns, such as those of further sections.
    damaged : int
        Rows in the columns that could not be read: NaN in each.
    remarks : sequence of str
        What a reader should know, one line each.
    """

    format: str
    columns: Sequence[NDArray[np.float64]]
    names: Sequence[str]
    units: Sequence[str]
    resolutions: Sequence[float]
    rate_hz: float | None = None
    rate_u_hz: float | None = None
    gaps: Sequence[tuple[int, int, float]] | None = None
    over_range: int = 0
    unread: int = 0
    damaged: int = 0
    remarks: list[str] = field(default_factory=list)

    @property
    def rows(self) -> int:
        """Number of rows."""
        return int(self.columns[0].size) if self.columns else 0
