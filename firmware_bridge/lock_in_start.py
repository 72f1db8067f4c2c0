"""What a board is asked for where its own lock-in shall send results instead of samples."""

from dataclasses import dataclass

from firmware_bridge.announcement import Announcement
from firmware_bridge.arguments import start_arguments
from firmware_bridge.errors import BridgeError

__all__ = ["LockInError", "LockInStart", "result_every_s"]


class LockInError(BridgeError):
    """A lock-in that the board cannot be asked for."""


@dataclass(frozen=True, slots=True)
class LockInStart:
    """A lock-in of one channel.

    Parameters
    ----------
    channel : str
        Its name, or its number from 1.
    time_s : float
        From one result to the next [s], by the board's counting, > 0.
    """

    channel: str
    time_s: float

    def arguments(self, announcement: Announcement) -> bytes:
        """Return the arguments of *start* for a board.

        Parameters
        ----------
        announcement : Announcement
            Of the board.

        Returns
        -------
        bytes
            Lock-in results and no samples.

        Raises
        ------
        LockInError
            If the board has no such channel, or the time is less than a sample or beyond 32 bits.
        """
        length = round(self.time_s * announcement.rate_hz)
        if not 1 <= length < 1 << 32:
            raise LockInError(
                f"a lock-in over {self.time_s:g} s would take {length} samples; 1 to 2^32 - 1 are possible"
            )
        return start_arguments(
            samples=False, lock_in_channel=self._position(announcement), lock_in_length=length
        )

    def _position(self, announcement: Announcement) -> int:
        names = [info.name for info in announcement.channels]
        if self.channel in names:
            return names.index(self.channel)
        if self.channel.isdecimal() and 1 <= int(self.channel) <= len(names):
            return int(self.channel) - 1
        raise LockInError(
            f"the board has no channel {self.channel!r}; it has "
            + ", ".join(f"{k} {name!r}" for k, name in enumerate(names, start=1))
        )


def result_every_s(asked: LockInStart | None, came_s: float) -> float:
    """Return the time from one lock-in result to the next.

    Parameters
    ----------
    asked : LockInStart or None
        What the board was asked for.
    came_s : float
        From one result to the next as they come [s], 0 where samples come.

    Returns
    -------
    float
        The longer of both [s], 0 where samples are expected.
    """
    return max(0.0 if asked is None else asked.time_s, came_s)
