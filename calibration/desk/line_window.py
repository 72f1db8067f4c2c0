"""Blocks of a running recording gathered into the stretches over which lines are fitted."""

from collections.abc import Sequence
from dataclasses import dataclass
from typing import TYPE_CHECKING

import numpy as np
from numpy.typing import NDArray

if TYPE_CHECKING:
    from firmware_bridge.live_events import LiveBlock

__all__ = ["LineWindow", "Stretch"]

FloatArray = NDArray[np.float64]

MOST_SAMPLES = 1 << 22
"""Samples a channel that a stretch may have: 34 MB each, so that memory stays bounded."""


@dataclass(frozen=True, eq=False, slots=True)
class Stretch:
    """Consecutive samples of the channels that are needed.

    Parameters
    ----------
    values : ndarray, shape (n, channels)
        In the channels' units, NaN where missing or over-range.
    over_range : int
        How many values are over range.
    ended_unix_s : float
        UTC of the arrival of the last of them, seconds since 1970.
    """

    values: FloatArray
    over_range: int
    ended_unix_s: float


class LineWindow:
    """The stretch that is being filled.

    Parameters
    ----------
    channels : sequence of int
        Which channels of the blocks, in which order.
    every : int
        Samples from the end of one stretch to the end of the next.
    over : int
        Samples of a stretch, the last ones of ``every``; at most `MOST_SAMPLES` are taken.
    """

    def __init__(self, channels: Sequence[int], every: int, over: int) -> None:
        self._channels = list(channels)
        self.every = max(1, every)
        self.over = max(1, min(over, self.every, MOST_SAMPLES))
        self._end: int | None = None
        self._begin_anew()

    def _begin_anew(self) -> None:
        self._values = np.full((self.over, len(self._channels)), np.nan)
        self._over_range = 0
        self._present = 0

    def add(self, block: "LiveBlock") -> list[Stretch]:
        """Take a block.

        Parameters
        ----------
        block : LiveBlock
            Counted on from those before; what comes late, for a stretch that is over, is left out.

        Returns
        -------
        list of Stretch
            Those that are complete, one at most unless the block is long; none for a stretch in
            which less than half of the samples came.
        """
        if self._end is None:
            self._end = block.start_index + self.every
        done: list[Stretch] = []
        start, values = block.start_index, block.values
        while start + len(values) >= self._end:
            self._put(start, values[: max(0, self._end - start)], block.over_range)
            if self._present >= 0.5 * self.over:
                done.append(Stretch(self._values, self._over_range, block.host_time))
            used = max(0, self._end - start)
            start, values = start + used, values[used:]
            # After a long gap the empty stretches between are passed over.
            self._end += self.every * max(1, (start - self._end) // self.every)
            self._begin_anew()
        self._put(start, values, block.over_range)
        return done

    def _put(self, start: int, values: FloatArray, over_range: int) -> None:
        assert self._end is not None  # noqa: S101  # set with the first block
        first = start - (self._end - self.over)
        skipped = max(0, -first)
        kept = values[skipped:, self._channels]
        if not len(kept):
            return
        place = first + skipped
        self._values[place : place + len(kept)] = kept
        self._present += len(kept)
        if over_range:
            self._over_range += int(np.count_nonzero(np.isnan(kept)))
