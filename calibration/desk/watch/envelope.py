"""The envelope of a channel over the last seconds: lowest and highest of each bin, in bounded memory."""

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

__all__ = ["Envelope", "EnvelopeView"]

FloatArray = NDArray[np.float64]


@dataclass(frozen=True, eq=False, slots=True)
class EnvelopeView:
    """What an envelope shows now.

    Parameters
    ----------
    time_s : ndarray, shape (bins,)
        Middle of each bin [s], 0 at the newest sample and negative before it.
    low, high : ndarray, shape (bins,)
        Lowest and highest value of each bin; NaN where there is none.
    lost : ndarray of bool, shape (bins,)
        Whether samples of the bin are missing or over-range.
    """

    time_s: FloatArray
    low: FloatArray
    high: FloatArray
    lost: NDArray[np.bool_]


class Envelope:
    """Lowest and highest value of every bin of the last ``window_s`` seconds.

    Parameters
    ----------
    rate_hz : float
        Samples per second; > 0.
    window_s : float
        Time shown [s]; > 0.
    bins : int
        At most as many bins.
    """

    def __init__(self, rate_hz: float, window_s: float, bins: int = 600) -> None:
        self.window_s = window_s
        self._rate_hz = rate_hz
        self._bin = max(1, round(rate_hz * window_s / bins))  # samples
        self._bins = max(2, min(bins, int(rate_hz * window_s / self._bin)))
        self.clear()

    def clear(self) -> None:
        """Forget everything."""
        self._low = np.full(self._bins, np.nan)
        self._high = np.full(self._bins, np.nan)
        self._seen = np.zeros(self._bins, dtype=np.int64)  # good samples in each bin
        self._first: int | None = None  # sample with which everything began
        self._next = 0

    def add(self, start_index: int, values: FloatArray) -> None:
        """Take the next samples.

        Parameters
        ----------
        start_index : int
            Index of the first one; what lies between it and the last one taken is missing.
        values : ndarray, shape (n,)
            NaN where missing or over-range.
        """
        if not values.size:
            return
        if self._first is None or start_index < self._next:
            self.clear()
            self._first, self._next = start_index, start_index
        newest = (start_index + values.size - 1) // self._bin
        self._open(newest)
        skipped = max(0, (newest - self._bins + 1) * self._bin - start_index)
        self._merge(start_index + skipped, values[skipped:])
        self._next = start_index + values.size

    def _open(self, newest: int) -> None:
        """Empty the bins up to the newest one, which so far held older samples."""
        held = (self._next - 1) // self._bin
        fresh = np.arange(max(held, newest - self._bins) + 1, newest + 1) % self._bins
        self._low[fresh] = np.nan
        self._high[fresh] = np.nan
        self._seen[fresh] = 0

    def _merge(self, start_index: int, values: FloatArray) -> None:
        lead = start_index % self._bin
        edges = np.arange(-lead, values.size, self._bin)
        edges[0] = 0
        places = (start_index // self._bin + np.arange(edges.size)) % self._bins
        self._low[places] = np.fmin(self._low[places], np.fmin.reduceat(values, edges))
        self._high[places] = np.fmax(self._high[places], np.fmax.reduceat(values, edges))
        self._seen[places] += np.add.reduceat(np.isfinite(values), edges, dtype=np.int64)

    def view(self) -> EnvelopeView:
        """Return the envelope as it is now, oldest bin first.

        Returns
        -------
        EnvelopeView
            Empty arrays where no sample has come yet.
        """
        if self._first is None:
            none = np.zeros(0)
            return EnvelopeView(none, none, none, np.zeros(0, dtype=bool))
        newest = (self._next - 1) // self._bin
        oldest = max(newest - self._bins + 1, self._first // self._bin)
        numbers = np.arange(oldest, newest + 1)
        places = numbers % self._bins
        begun = np.maximum(numbers * self._bin, self._first)
        due = np.minimum((numbers + 1) * self._bin, self._next) - begun
        return EnvelopeView(
            np.asarray(((numbers + 0.5) * self._bin - self._next) / self._rate_hz),
            self._low[places],
            self._high[places],
            self._seen[places] < due,
        )
