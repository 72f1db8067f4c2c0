"""Where each sample of a recording stands in its file: runs of records without a break."""

from dataclasses import dataclass
from typing import Any

import numpy as np
from numpy.typing import NDArray

from firmware_bridge.frame import OVER_RANGE
from firmware_bridge.record_file import Chunk

__all__ = ["RUN", "Placed", "RecordIndex", "lengths"]

RUN = np.dtype(
    [
        ("index", "u8"),  # first sample, by the board's counting; on the grid once placed
        ("record", "i8"),  # first record
        ("records", "i8"),
        ("last", "i8"),  # samples in the last record; the others are full
        ("stream", "i8"),
    ]
)
"""Consecutive records whose samples are consecutive."""


@dataclass(frozen=True, eq=False, slots=True)
class Placed:
    """The runs of one stream in order, without duplicates.

    Parameters
    ----------
    runs : ndarray of RUN
        In the order of their indices.
    duplicates : int
        Records left out because their samples stand elsewhere already.
    """

    runs: NDArray[Any]
    duplicates: int


class RecordIndex:
    """Collect the runs of a recording, chunk by chunk.

    Parameters
    ----------
    slots : int
        Samples in a full record.
    """

    def __init__(self, slots: int) -> None:
        self._slots = slots
        self._runs: list[NDArray[Any]] = []
        self._flagged: list[NDArray[np.int64]] = []

    def add(self, chunk: Chunk) -> None:
        """Take the samples records of one chunk.

        Parameters
        ----------
        chunk : Chunk
            The next one.
        """
        rows = chunk.samples
        if not rows.size:
            return
        head = chunk.heads[rows]
        index, filled = head["index"], head["filled"].astype(np.int64)
        breaks = np.ones(rows.size, bool)
        follows = index[1:] == index[:-1] + filled[:-1].astype(np.uint64)
        breaks[1:] = ~(
            follows
            & (filled[:-1] == self._slots)
            & (np.diff(rows) == 1)
            & (head["stream"][1:] == head["stream"][:-1])
        )
        starts = np.flatnonzero(breaks)
        runs = np.zeros(starts.size, RUN)
        runs["index"], runs["stream"] = index[starts], head["stream"][starts]
        runs["record"] = chunk.first + rows[starts]
        runs["records"] = np.diff(starts, append=rows.size)
        runs["last"] = filled[starts + runs["records"] - 1]
        self._runs.append(self._joined(runs[(runs["records"] > 1) | (runs["last"] > 0)]))
        self._flagged.append(chunk.first + rows[(head["flags"] & OVER_RANGE) != 0])

    def _joined(self, runs: NDArray[Any]) -> NDArray[Any]:
        """Lengthen the last run so far by the first of ``runs`` where they belong together."""
        if not (self._runs and self._runs[-1].size and runs.size):
            return runs
        old, new = self._runs[-1][-1:], runs[0]
        length = int(old["records"][0]) * self._slots
        if (
            old["last"][0] == self._slots
            and old["record"][0] + old["records"][0] == new["record"]
            and old["stream"][0] == new["stream"]
            and int(old["index"][0]) + length == int(new["index"])
        ):
            old["records"] += new["records"]
            old["last"] = new["last"]
            return runs[1:]
        return runs

    @property
    def flagged(self) -> NDArray[np.int64]:
        """Numbers of the records that the board flagged as over-range, in order."""
        return np.concatenate([*self._flagged, np.zeros(0, np.int64)])

    def streams(self) -> list[int]:
        """Return the stream ids in the order of their first records.

        Returns
        -------
        list of int
            Stream ids.
        """
        runs = self._all()
        ids, first = np.unique(runs["stream"], return_index=True)
        return [int(ids[k]) for k in np.argsort(first)]

    def _all(self) -> NDArray[Any]:
        if len(self._runs) > 1:
            self._runs = [np.concatenate(self._runs)]
        return self._runs[0] if self._runs else np.zeros(0, RUN)

    def placed(self, stream: int) -> Placed:
        """Return the runs of one stream in order, each sample once.

        Parameters
        ----------
        stream : int
            Stream id.

        Returns
        -------
        Placed
            Its runs.
        """
        runs = self._all()
        runs = runs[runs["stream"] == stream]
        ends = runs["index"] + lengths(runs, self._slots).astype(np.uint64)
        if (runs["index"][1:] >= ends[:-1]).all():
            return Placed(runs, 0)
        runs = runs[np.lexsort((runs["record"], runs["index"]))]
        ends = runs["index"] + lengths(runs, self._slots).astype(np.uint64)
        reached = np.zeros(runs.size, np.uint64)
        reached[1:] = np.maximum.accumulate(ends)[:-1]
        # Of each run the records that begin before what is reached already are left out.
        slots = np.uint64(self._slots)
        behind = np.where(reached > runs["index"], reached - runs["index"], np.uint64(0))
        skip = np.minimum(-(-behind.astype(np.float64) // self._slots), runs["records"])
        skip = skip.astype(np.int64)
        runs["index"] += skip.astype(np.uint64) * slots
        runs["record"] += skip
        runs["records"] -= skip
        return Placed(runs[runs["records"] > 0], int(skip.sum()))


def lengths(runs: NDArray[Any], slots: int) -> NDArray[np.int64]:
    """Return the number of samples in each run.

    Parameters
    ----------
    runs : ndarray of RUN
        Runs.
    slots : int
        Samples in a full record.

    Returns
    -------
    ndarray of int
        Samples.
    """
    samples: NDArray[np.int64] = (runs["records"] - 1) * slots + runs["last"]
    return samples
