"""What the two threads of a port need of whoever takes the messages."""

from pathlib import Path
from typing import Protocol

from firmware_bridge.announcement import Announcement
from firmware_bridge.line_frames import Piece

__all__ = ["Sink"]


class Sink(Protocol):
    """A taker of messages, such as `Intake`, which describes each of these."""

    @property
    def files(self) -> list[Path]:
        """The files written, in order."""

    @property
    def announcement(self) -> Announcement | None:
        """What the board says about what it sends now."""

    @property
    def is_announced(self) -> bool:
        """Whether the announcement for what the board sends now is known."""

    @property
    def is_known(self) -> bool:
        """Whether any board has announced itself."""

    @property
    def is_complete(self) -> bool:
        """Whether nothing more is wanted."""

    @property
    def wanted(self) -> int | None:
        """Grid samples that the present file shall have."""

    @property
    def reached(self) -> int:
        """Grid samples so far."""

    @property
    def rate_hz(self) -> float | None:
        """Announced rate."""

    @property
    def every_s(self) -> float:
        """From one lock-in result to the next [s], where a board sends nothing else."""

    @property
    def gaps(self) -> int:
        """Gaps so far."""

    @property
    def flagged(self) -> int:
        """Frames flagged as over-range so far."""

    @property
    def bytes_discarded(self) -> int:
        """Bytes thrown away so far."""

    def take(self, piece: Piece, monotonic_ns: int, unix_ns: int) -> None:
        """Take one message.

        Parameters
        ----------
        piece : bytes, Discarded, Pause or Remark
            Content and CRC, or what was thrown away.
        monotonic_ns, unix_ns : int
            The host's clocks at its arrival.
        """

    def tick(self, monotonic_ns: int, unix_ns: int) -> None:
        """Do what is due by time.

        Parameters
        ----------
        monotonic_ns, unix_ns : int
            The host's clocks now.
        """

    def remark(self, text: str) -> None:
        """Take note of something for people.

        Parameters
        ----------
        text : str
            One line.
        """

    def away(self) -> None:
        """Take note that the port was away."""

    def close(self, *, is_as_asked: bool = True) -> None:
        """End.

        Parameters
        ----------
        is_as_asked : bool
            False where the port or a file failed.
        """
