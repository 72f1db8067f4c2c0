"""What came and was not kept: how many bytes, why, and what is still to be said of them."""

from collections import Counter
from collections.abc import Callable

from firmware_bridge.envelope import Discarded

__all__ = ["DiscardTally"]


class DiscardTally:
    """Count what is discarded, in all and between frames that were kept."""

    def __init__(self) -> None:
        self.bytes = 0
        """Bytes discarded."""
        self.bytes_midway = 0
        """Of these the bytes between two frames that were kept; frames received twice not counted."""
        self._bytes_since = 0  # the last frame that was kept
        self._unsaid: Counter[str] = Counter()

    def add(self, piece: Discarded, *, has_begun: bool) -> None:
        """Count one piece.

        Parameters
        ----------
        piece : Discarded
            How long it was, and why it is not kept.
        has_begun : bool
            Whether the recording has a file: what comes before is not midway.
        """
        self.bytes += piece.count
        if has_begun and not piece.reason.startswith("duplicate"):
            self._bytes_since += piece.count
        self._unsaid[piece.reason.split(" index ")[0]] += piece.count

    def kept(self) -> None:
        """Take note that a frame was kept: what was discarded before it was so midway."""
        self.bytes_midway += self._bytes_since
        self._bytes_since = 0

    def say(self, remark: Callable[[str], None]) -> None:
        """Say what has been discarded since the last time, a line for each reason.

        Parameters
        ----------
        remark : callable
            Takes each line.
        """
        for reason, count in self._unsaid.items():
            remark(f"{count} bytes discarded: {reason}")
        self._unsaid.clear()
