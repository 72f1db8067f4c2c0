"""Samples of a recording out of its runs of records: counts to channel units, NaN where over-range."""

from collections.abc import Sequence
from typing import Any

import numpy as np
from numpy.typing import NDArray

from firmware_bridge.over_range import OverRange
from firmware_bridge.record_file import RecordFile
from firmware_bridge.record_index import lengths
from firmware_bridge.span import Span

__all__ = ["RunReader"]


class RunReader:
    """Read any stretch of the grid.

    Parameters
    ----------
    file : RecordFile
        The records.
    runs : ndarray of RUN
        Where they stand on the grid, in order.
    over_range : OverRange
        Which samples are over-range.
    """

    def __init__(self, file: RecordFile, runs: NDArray[Any], over_range: OverRange) -> None:
        self._file, self._runs, self._over_range = file, runs, over_range
        self._channels = file.header.announcement.channels

    def read(self, channels: Sequence[int], start: int, stop: int) -> Span:
        """Return samples ``start`` to ``stop`` (not included) of some channels.

        Parameters
        ----------
        channels : sequence of int
            Positions in the announcement.
        start, stop : int
            Grid indices.

        Returns
        -------
        Span
            Values and how many are over-range.
        """
        wanted = list(channels)
        values = np.full((stop - start, len(wanted)), np.nan)
        over_range = 0
        ends = self._runs["index"].astype(np.int64) + lengths(self._runs, self._file.slots)
        first = int(np.searchsorted(ends, start, "right"))
        for run in self._runs[first:]:
            if int(run["index"]) >= stop:
                break
            over_range += self._read_run(run, wanted, start, values)
        return Span(values, over_range)

    def count_over_range(self, length: int) -> int:
        """Return the number of over-range values, all channels together.

        Parameters
        ----------
        length : int
            Of the grid.

        Returns
        -------
        int
            Only flagged records are read for it.
        """
        total, everything = 0, range(len(self._channels))
        for run in self._runs if self._over_range.is_any else self._runs[:0]:
            for start, stop in self._over_range.stretches(run):
                total += self.read(everything, start, min(stop, length)).over_range
        return total

    def _read_run(
        self,
        run: Any,  # noqa: ANN401  # a row of RUN
        wanted: list[int],
        start: int,
        values: NDArray[np.float64],
    ) -> int:
        """Put one run's samples where they belong in values, which begin at ``start``."""
        slots, origin = self._file.slots, int(run["index"])
        length = (int(run["records"]) - 1) * slots + int(run["last"])
        begin, end = max(start, origin), min(start + len(values), origin + length)
        record = (begin - origin) // slots
        over_range = 0
        while begin < end:
            last = (end - 1 - origin) // slots
            rows = self._file.rows(int(run["record"]) + record, last - record + 1)
            counts = self._file.counts(rows)
            skip = begin - origin - record * slots
            part = values[begin - start : min(end, begin + len(counts) - skip) - start]
            over_range += self._fill(part, int(run["record"]) + record, counts, skip, wanted)
            begin += len(part)
            record += len(rows)
        return over_range

    def _fill(
        self,
        part: NDArray[np.float64],
        record: int,
        counts: NDArray[Any],
        skip: int,
        wanted: list[int],
    ) -> int:
        """Fill values from whole records; return how many are over-range."""
        self._scale(counts[skip : skip + len(part)], wanted, part)
        hit = self._over_range.maybe_marks(record, counts, skip, len(part))
        if hit is None:
            return 0
        part[hit[:, wanted]] = np.nan
        return int(np.count_nonzero(hit[:, wanted]))

    def _scale(self, counts: NDArray[Any], wanted: list[int], out: NDArray[np.float64]) -> None:
        for column, position in enumerate(wanted):
            channel = self._channels[position]
            np.multiply(counts[:, position], channel.scale, out=out[:, column])
            if channel.offset:
                out[:, column] += channel.offset
