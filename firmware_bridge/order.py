"""The order of one stream: what comes next, what is missing, what came twice or late."""

from bisect import bisect_right
from collections import deque
from typing import Generic, TypeVar

from firmware_bridge.envelope import Discarded
from firmware_bridge.gap import Gap

__all__ = ["StreamOrder"]

T = TypeVar("T")

_CHECKS_KEPT = 1024  # frames whose CRC tells a duplicate from a conflict
_GAPS_KEPT = 4096  # open gaps that a late frame can still close


class StreamOrder(Generic[T]):
    """Put the frames of one stream in order, with every gap exact.

    Parameters
    ----------
    window : int
        Frames held while one is missing.
    span : int, optional
        Samples between the first missing and the last held one after which the gap is given up.
    """

    def __init__(self, window: int, span: int | None = None) -> None:
        self._window = window
        self._span = span
        self._held: dict[int, tuple[int, bytes, T]] = {}  # index: length, message, frame
        self._starts: list[int] = []  # open gaps, in order
        self._ends: list[int] = []
        self._checks: dict[int, bytes] = {}
        self._recent: deque[int] = deque()
        self._begun = False
        self.expected = 0
        """Index of the sample after the last one given out."""

    def put(self, index: int, length: int, frame: T, message: bytes) -> list[T | Gap | Discarded]:
        """Take one frame and return what comes out, in order.

        Parameters
        ----------
        index, length : int
            First sample and number of samples.
        frame : T
            What to give out.
        message : bytes
            The frame with its CRC, by which a duplicate is told from a conflict.

        Returns
        -------
        list of T, Gap or Discarded
            Whatever is due now.
        """
        if not self._begun:
            # What came before the first frame seen is no gap, but a late frame from there is kept.
            self._begun = True
            self.expected = index
            self._starts, self._ends = ([0], [index]) if index else ([], [])
        if not length:
            return [frame]
        if index == self.expected and not self._held:
            self._note(index, message)
            self.expected = index + length
            return [frame]
        if index >= self.expected:
            return self._hold(index, length, frame, message)
        return self._late(index, length, frame, message)

    def is_back(self, index: int, length: int, message: bytes) -> bool:
        """Tell whether a frame cannot be one of this stream again: its board may have begun anew.

        Parameters
        ----------
        index, length : int
            First sample and number of samples.
        message : bytes
            The frame with its CRC.

        Returns
        -------
        bool
            True where the frame lies behind and is neither known by its CRC nor just late.
        """
        if not self._begun or index >= self.expected or not length:
            return False
        known = self._checks.get(index)
        if known is not None:
            return known != message[-4:]
        is_far = self.expected - index > _CHECKS_KEPT * length
        return is_far or not self._is_open(index, length)

    def _is_open(self, index: int, length: int) -> bool:
        place = bisect_right(self._starts, index) - 1
        return place >= 0 and index + length <= self._ends[place]

    def flush(self) -> list[T | Gap | Discarded]:
        """Give out everything held, with the gaps between.

        Returns
        -------
        list of T or Gap
            In order.
        """
        out: list[T | Gap | Discarded] = []
        while self._held:
            out += self._release()
        return out

    def _hold(self, index: int, length: int, frame: T, message: bytes) -> list[T | Gap | Discarded]:
        if index in self._held:
            same = self._held[index][1] == message
            return [_duplicate(message, index) if same else _conflict(message, index)]
        self._held[index] = (length, message, frame)
        out: list[T | Gap | Discarded] = []
        while self._held and self._is_due():
            out += self._release()
        return out

    def _is_due(self) -> bool:
        if self.expected in self._held or len(self._held) > self._window:
            return True
        if self._span is None:
            return False
        last = max(self._held)
        return last + self._held[last][0] - self.expected > self._span

    def _release(self) -> list[T | Gap | Discarded]:
        index = min(self._held)
        length, message, frame = self._held.pop(index)
        if index < self.expected:
            return [_conflict(message, index)]
        out: list[T | Gap | Discarded] = []
        if index > self.expected:
            out.append(Gap(self.expected, index - self.expected))
            self._starts.append(self.expected)
            self._ends.append(index)
            if len(self._starts) > _GAPS_KEPT:
                del self._starts[0], self._ends[0]
        self._note(index, message)
        self.expected = index + length
        return [*out, frame]

    def _late(self, index: int, length: int, frame: T, message: bytes) -> list[T | Gap | Discarded]:
        if self._is_open(index, length):
            place = bisect_right(self._starts, index) - 1
            start, end = self._starts[place], self._ends[place]
            left = [(a, b) for a, b in ((start, index), (index + length, end)) if a < b]
            self._starts[place : place + 1] = [a for a, _ in left]
            self._ends[place : place + 1] = [b for _, b in left]
            self._note(index, message)
            return [frame]
        same = self._checks.get(index, message[-4:]) == message[-4:]
        return [_duplicate(message, index) if same else _conflict(message, index)]

    def _note(self, index: int, message: bytes) -> None:
        self._checks[index] = message[-4:]
        self._recent.append(index)
        if len(self._recent) > _CHECKS_KEPT:
            self._checks.pop(self._recent.popleft(), None)


def _duplicate(message: bytes, index: int) -> Discarded:
    return Discarded.message(message, f"duplicate of the frame at index {index}")


def _conflict(message: bytes, index: int) -> Discarded:
    reason = f"other samples for index {index}, which has been received"
    return Discarded.message(message, reason)
