"""What is suspect though nothing is missing: repeated blocks, stuck values, absent codes."""

import math

import numpy as np
from numpy.typing import NDArray

__all__ = ["Codes", "Repetition", "StuckRuns"]

_DISTINCT = 8  # values in a block: fewer may repeat by chance or by rest
_KEPT = 65536  # blocks
_WIDEST = 1 << 20  # codes
_BESIDE = 3  # on each side, so that neither the flank nor the gap between two peaks looks missing
_EXPECTED = 25.0  # hits by its neighbours: a code that then has none is missing, p < 1e-10


class Repetition:
    """Find blocks of samples that are equal in every value to one of the 65536 blocks before.

    Parameters
    ----------
    samples : int
        Samples a block: a board that sends a buffer twice repeats a whole frame.
    """

    def __init__(self, samples: int) -> None:
        self.samples = samples
        self.blocks = 0
        """Blocks looked at, those without missing values."""
        self.repeated: list[int] = []
        """First samples of the blocks seen before."""
        self._rest = np.empty((0, 0))
        self._seen: dict[int, None] = {}

    def add(self, start: int, values: NDArray[np.float64]) -> None:
        """Take the next values.

        Parameters
        ----------
        start : int
            Grid index of the first.
        values : ndarray, shape (n, channels)
            All channels, NaN where missing.
        """
        if self._rest.size:
            start -= len(self._rest)
            values = np.concatenate((self._rest, values))
        whole = len(values) // self.samples * self.samples
        self._rest = values[whole:]
        for first in range(0, whole, self.samples):
            self._take(start + first, np.ascontiguousarray(values[first : first + self.samples]))

    def _take(self, index: int, block: NDArray[np.float64]) -> None:
        if np.isnan(block).any():
            return
        self.blocks += 1
        key = hash(block.tobytes())
        if key in self._seen and np.unique(block).size >= _DISTINCT:
            self.repeated.append(index)
        self._seen[key] = None
        if len(self._seen) > _KEPT:
            del self._seen[next(iter(self._seen))]

    @property
    def is_suspicious(self) -> bool:
        """True if some blocks repeat; where most do the signal itself is periodic to the last digit."""
        return 0 < len(self.repeated) <= 0.5 * self.blocks


class StuckRuns:
    """Find the longest run of one value in each channel, and whether it is longer than chance.

    Parameters
    ----------
    channels : int
        How many.
    """

    def __init__(self, channels: int) -> None:
        self._last = np.full(channels, np.nan)
        self._open = np.zeros(channels, np.int64)  # length of the run that still goes on
        self._equal = np.zeros(channels, np.int64)
        self._pairs = np.zeros(channels, np.int64)
        self.longest = np.zeros(channels, np.int64)
        """Samples in the longest run of each channel."""
        self.starts = np.zeros(channels, np.int64)
        """Its first sample."""

    def add(self, start: int, values: NDArray[np.float64]) -> None:
        """Take the next values.

        Parameters
        ----------
        start : int
            Grid index of the first.
        values : ndarray, shape (n, channels)
            All channels, NaN where missing.
        """
        for k in range(values.shape[1]):
            column = values[:, k]
            before = np.concatenate(([self._last[k]], column[:-1]))
            same = column == before
            self._equal[k] += np.count_nonzero(same)
            self._pairs[k] += np.count_nonzero(~np.isnan(column) & ~np.isnan(before))
            self._runs(k, start, same)
            self._last[k] = column[-1]

    def _runs(self, k: int, start: int, same: NDArray[np.bool_]) -> None:
        begins = np.flatnonzero(~same)
        edges = np.concatenate(([-self._open[k]], begins, [same.size]))
        lengths = np.diff(edges)
        best = int(np.argmax(lengths))
        if lengths[best] > self.longest[k]:
            self.longest[k], self.starts[k] = lengths[best], start + edges[best]
        self._open[k] = lengths[-1]

    def is_suspicious(self, channel: int) -> bool:
        """Tell whether the longest run is far longer than the channel's noise explains.

        Parameters
        ----------
        channel : int
            Which.

        Returns
        -------
        bool
            False for a channel that never changes: that is said otherwise.
        """
        run, pairs = int(self.longest[channel]), int(self._pairs[channel])
        # Equal neighbours outside the run are the channel's own habit.
        outside = max(1, pairs - run)
        share = max(0, int(self._equal[channel]) - run + 1) / outside
        if not 0 <= share < 0.9 or pairs <= run:
            return False
        by_chance = math.log(pairs + 1) / -math.log(max(share, 1e-3))
        return run > 50 + 5 * by_chance


class Codes:
    """Count how often each code of a converter occurs.

    Parameters
    ----------
    scale, offset : float
        Value = code · scale + offset.
    """

    def __init__(self, scale: float, offset: float) -> None:
        self._scale, self._offset = scale, offset
        self._low = 0
        self._hits = np.zeros(0, np.int64)
        self._is_too_wide = False

    def add(self, values: NDArray[np.float64]) -> None:
        """Take values of the channel.

        Parameters
        ----------
        values : ndarray, shape (n,)
            NaN where missing.
        """
        values = values[~np.isnan(values)]
        if self._is_too_wide or not values.size or not self._scale:
            return
        codes = np.rint((values - self._offset) / self._scale)
        low, high = float(codes.min()), float(codes.max())
        if self._hits.size:
            low, high = min(low, self._low), max(high, self._low + self._hits.size - 1)
        if high - low >= _WIDEST or abs(low) > 2**53:
            self._is_too_wide = True
            return
        hits = np.bincount((codes - low).astype(np.int64), minlength=int(high - low) + 1)
        if self._hits.size:
            hits[self._low - int(low) :][: self._hits.size] += self._hits
        self._low, self._hits = int(low), hits

    def missing(self) -> list[int]:
        """Return the codes that never occur though those beside them do, often.

        Returns
        -------
        list of int
            Empty also where codes come in larger steps, as numbers that were rounded do.
        """
        used = np.flatnonzero(self._hits)
        if self._is_too_wide or used.size <= 16:
            return []
        step = int(np.gcd.reduce(np.diff(used)))
        hits = self._hits[used[0] :: step]
        sums = np.concatenate((np.zeros(_BESIDE + 1), np.cumsum(hits), [hits.sum()] * _BESIDE))
        mean = (sums[_BESIDE:] - sums[:-_BESIDE]) / _BESIDE  # of the codes that end before each
        beside = np.minimum(mean[: hits.size], mean[_BESIDE + 1 :][: hits.size])
        absent = np.flatnonzero((hits == 0) & (beside >= _EXPECTED))
        busy = np.count_nonzero(beside >= _EXPECTED)
        if not absent.size or absent.size > 0.3 * busy:
            return []
        return [int(self._low + used[0] + step * k) for k in absent]
