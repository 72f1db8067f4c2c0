"""The streams of a recording, one behind the other on its grid, with the gaps between and inside."""

from typing import Any

import numpy as np
from numpy.typing import NDArray

from firmware_bridge.gap import Gap
from firmware_bridge.host_note import End, Join
from firmware_bridge.record_index import RUN, RecordIndex, lengths
from firmware_bridge.recording_header import RecordingError

__all__ = ["StreamPlacing"]

_LENGTH_MAX = 1 << 53  # indices and lengths stay exact as int64 and as float64


class StreamPlacing:
    """Place the runs of records of each stream on the grid.

    Parameters
    ----------
    path : str
        The recording, for the errors.
    slots : int
        Samples in a full record.
    joins : dict of int to Join
        Where each stream stands.
    end : End, optional
        Where the recording ended as asked.
    """

    def __init__(self, path: str, slots: int, joins: dict[int, Join], end: End | None) -> None:
        self._path, self._slots, self._joins, self._end = path, slots, joins, end
        self._placed: list[NDArray[Any]] = [np.zeros(0, RUN)]
        self.gaps: list[Gap] = []
        """On the grid, in order."""
        self.reached = 0
        """Length of the grid."""
        self.duplicates = 0
        """Records left out because their samples stand elsewhere already."""

    @property
    def runs(self) -> NDArray[Any]:
        """The runs on the grid, in order."""
        return np.concatenate(self._placed)

    def place(self, index: RecordIndex) -> None:
        """Place all streams.

        Parameters
        ----------
        index : RecordIndex
            Of all records.

        Raises
        ------
        RecordingError
            If indices are beyond what can be true.
        """
        for stream in index.streams():
            placed = index.placed(stream)
            self.duplicates += placed.duplicates
            self._put(stream, placed.runs)

    def _put(self, stream: int, runs: NDArray[Any]) -> None:
        first = int(runs["index"][0])
        start = self._start(stream, first)
        last = int(np.argmax(runs["index"]))  # before the counter can wrap in the sums below
        self._check(_end(runs[last : last + 1], self._slots) - first + start)
        runs["index"] = runs["index"] - np.uint64(first) + np.uint64(start)
        self.reached = _end(runs[-1:], self._slots)
        self._check(self.reached)
        self.gaps += _gaps_inside(runs, self._slots)
        if self._end is not None and self._end.stream == stream:
            self._finish(self._end.index - first + start)
        self._placed.append(runs)

    def _start(self, stream: int, first: int) -> int:
        """Return where a stream begins, and note the gap before a later one."""
        if len(self._placed) == 1:
            return 0
        start, length_u = self.reached, 0.0
        join = self._joins.get(stream)
        if join is not None:
            start, length_u = max(start, join.grid + first - join.index), join.grid_u
        self.gaps.append(Gap(self.reached, start - self.reached, exact=False, length_u=length_u))
        return start

    def _finish(self, end: int) -> None:
        """Go on to where the recording ended: what is missing there is missing in it."""
        if end > self.reached:
            self.gaps.append(Gap(self.reached, end - self.reached))
            self.reached = end
        self._check(self.reached)

    def _check(self, reached: int) -> None:
        if reached > _LENGTH_MAX:
            raise RecordingError(f"{self._path} spans {reached} samples, more than can be true")


def _end(run: NDArray[Any], slots: int) -> int:
    """Return the index behind one run."""
    return int(run["index"][0]) + int(lengths(run, slots)[0])


def _gaps_inside(runs: NDArray[Any], slots: int) -> list[Gap]:
    ends = runs["index"][:-1] + lengths(runs, slots)[:-1].astype(np.uint64)
    missing = runs["index"][1:] - ends
    return [Gap(int(ends[k]), int(missing[k])) for k in np.flatnonzero(missing).tolist()]
