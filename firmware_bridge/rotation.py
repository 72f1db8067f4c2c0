"""When a recording that goes on and on begins its next file, and what that one is called."""

import os
from collections.abc import Callable
from dataclasses import dataclass
from pathlib import Path

from firmware_bridge.errors import BridgeError

__all__ = ["Rotation"]


@dataclass(frozen=True, slots=True)
class Rotation:
    """End a file before it is too large or too long, and go on in a next one without a lost sample.

    Parameters
    ----------
    rotate_bytes : int, optional
        Largest size of one file [bytes]; a file holds at least one frame.
    rotate_s : float, optional
        Longest length of one file by the board's counting [s], to the frame.
    next_path : callable, optional
        Returns the path of file number n, 2 for the second; it must not exist. By default NAME-n.
    on_ended : callable, optional
        Takes the path of a file that is complete, once the next one has begun.
    """

    rotate_bytes: int | None = None
    rotate_s: float | None = None
    next_path: Callable[[int], str | os.PathLike[str]] | None = None
    on_ended: Callable[[Path], None] | None = None

    def __post_init__(self) -> None:
        if self.rotate_bytes is not None and self.rotate_bytes <= 0:
            raise BridgeError(f"rotate_bytes must be > 0, got {self.rotate_bytes!r}")
        if self.rotate_s is not None and not 0 < self.rotate_s < float("inf"):
            raise BridgeError(f"rotate_s must be > 0 s and finite, got {self.rotate_s!r}")

    def is_due(self, size_bytes: int, length_s: float) -> bool:
        """Return whether a file ends before its next frame.

        Parameters
        ----------
        size_bytes : int
            Its size with that frame.
        length_s : float
            Its length without it.

        Returns
        -------
        bool
            True if it would be too large, or is long enough.
        """
        too_large = self.rotate_bytes is not None and size_bytes > self.rotate_bytes
        return too_large or (self.rotate_s is not None and length_s >= self.rotate_s)

    def ended(self, path: Path) -> None:
        """Tell of a file that is complete.

        Parameters
        ----------
        path : Path
            Which.
        """
        if self.on_ended is not None:
            self.on_ended(path)
