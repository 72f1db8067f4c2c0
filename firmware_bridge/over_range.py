"""Which samples of a recording are over-range: those at the range's ends in a flagged record."""

from typing import Any

import numpy as np
from numpy.typing import NDArray

from firmware_bridge.announcement import Announcement

__all__ = ["OverRange"]

_NEAR = 16384  # samples


class OverRange:
    """Mark over-range samples, record by record.

    Parameters
    ----------
    announcement : Announcement
        With the range of each channel and the slots of a record.
    flagged : ndarray of int
        Numbers of the records that the board flagged, in order.
    """

    def __init__(self, announcement: Announcement, flagged: NDArray[np.int64]) -> None:
        self._announcement, self._flagged = announcement, flagged
        self._slots = announcement.slots

    @property
    def is_any(self) -> bool:
        """Whether any record is flagged."""
        return bool(self._flagged.size)

    def maybe_marks(
        self, record: int, counts: NDArray[Any], skip: int, take: int
    ) -> NDArray[np.bool_] | None:
        """Return which samples are over-range.

        Parameters
        ----------
        record : int
            Number of the first record.
        counts : ndarray, shape (records · slots, channels)
            Counts of whole records.
        skip, take : int
            Which of the samples: how many not, then how many.

        Returns
        -------
        ndarray of bool, shape (take, channels), or None
            None where none of the records is flagged.
        """
        slots, records = self._slots, len(counts) // self._slots
        rows = self._inside(record, record + records) - record
        if not rows.size:
            return None
        low, high = self._limits()
        framed = counts.reshape(-1, slots, counts.shape[1])[rows]
        hit = (framed <= low) | (framed >= high)
        # A flagged frame with no sample at an end of the range: any of them may be the one.
        hit[~hit.any(axis=(1, 2))] = True
        marks = np.zeros((records, slots, counts.shape[1]), bool)
        marks[rows] = hit
        return marks.reshape(counts.shape)[skip : skip + take]

    def stretches(self, run: Any) -> list[tuple[int, int]]:  # noqa: ANN401  # a row of RUN
        """Return where on the grid the flagged records of a run stand.

        Parameters
        ----------
        run : row of RUN
            Placed on the grid.

        Returns
        -------
        list of (int, int)
            First sample and the one behind the last; records near each other are put together,
            so that nothing is read twice.
        """
        flagged = self._inside(run["record"], run["record"] + run["records"])
        starts = (flagged - run["record"]) * self._slots + int(run["index"])
        parts = np.split(starts, np.flatnonzero(np.diff(starts // _NEAR)) + 1)
        return [(int(part[0]), int(part[-1]) + self._slots) for part in parts if part.size]

    def _inside(self, first: int, behind: int) -> NDArray[np.int64]:
        return self._flagged[slice(*np.searchsorted(self._flagged, [first, behind]))]

    def _limits(self) -> tuple[NDArray[np.int64], NDArray[np.int64]]:
        low, high = self._announcement.code_limits
        lows = [low if c.low is None else c.low for c in self._announcement.channels]
        highs = [high if c.high is None else c.high for c in self._announcement.channels]
        return np.array(lows), np.array(highs)
