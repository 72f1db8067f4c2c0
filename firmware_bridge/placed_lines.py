"""Lines of text in their places: a stretch without a gap, and what is missing before it."""

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

__all__ = ["PlacedLines"]


@dataclass(frozen=True, eq=False, slots=True)
class PlacedLines:
    """Lines without a gap between them.

    Parameters
    ----------
    rows : ndarray, shape (n, columns)
        Their numbers.
    stamps_s, arrivals_s : ndarray, shape (n,)
        By the board's clock and by the host's.
    missing : int
        Samples missing before them.
    missing_u : float
        Standard uncertainty of ``missing``; 0 where it is exact.
    is_restart : bool
        True where the board's clock began anew, so that the host's tells ``missing``.
    """

    rows: NDArray[np.float64]
    stamps_s: NDArray[np.float64]
    arrivals_s: NDArray[np.float64]
    missing: int = 0
    missing_u: float = 0.0
    is_restart: bool = False

    def followed_by(self, other: "PlacedLines") -> "PlacedLines":
        """Return these lines and others behind them, nothing missing.

        Parameters
        ----------
        other : PlacedLines
            What follows.

        Returns
        -------
        PlacedLines
            All of them.
        """
        return PlacedLines(
            np.concatenate((self.rows, other.rows)),
            np.concatenate((self.stamps_s, other.stamps_s)),
            np.concatenate((self.arrivals_s, other.arrivals_s)),
        )

    def part(self, which: slice) -> "PlacedLines":
        """Return some of the lines, nothing missing before them.

        Parameters
        ----------
        which : slice
            Which.

        Returns
        -------
        PlacedLines
            Views.
        """
        return PlacedLines(self.rows[which], self.stamps_s[which], self.arrivals_s[which])
