"""The grid of a recording: where the streams of a board stand on it, through all its files."""

from typing import TYPE_CHECKING

if TYPE_CHECKING:
    from firmware_bridge.announcement import Announcement

__all__ = ["RecordingGrid"]


class RecordingGrid:
    """Count samples on the grid of the present file and in the files before it.

    Parameters
    ----------
    duration_s : float, optional
        Length of the recording by the board's counting [s], all files together.
    """

    def __init__(self, duration_s: float | None = None) -> None:
        self._duration_s = duration_s
        self._offsets: dict[int, int] = {}  # stream: grid index of the board's index 0
        self._closed: set[int] = set()  # streams of earlier files
        self.announcement: Announcement | None = None
        """Of the present file."""
        self.reached = 0
        """Grid index after the last sample, in the present file."""
        self.earlier = 0
        """Grid samples in the files before the present one."""
        self.earlier_s = 0.0
        """Their length by the board's counting [s]."""

    def __contains__(self, stream: int) -> bool:
        return stream in self._offsets

    @property
    def rate_hz(self) -> float | None:
        """Announced rate of the present file, None before the first one."""
        return None if self.announcement is None else self.announcement.rate_hz

    @property
    def wanted(self) -> int | None:
        """Grid samples the present file shall have, None without duration or announcement."""
        if self._duration_s is None or self.announcement is None:
            return None
        return round((self._duration_s - self.earlier_s) * self.announcement.rate_hz)

    @property
    def is_full(self) -> bool:
        """Whether the recording is as long as it shall be."""
        return self.wanted is not None and self.reached >= self.wanted

    @property
    def last_end(self) -> tuple[int, int]:
        """The stream that joined last, and its index where the present file has been reached."""
        stream = next(reversed(self._offsets))
        return stream, max(0, self.index(stream, self.reached))

    def is_closed(self, stream: int) -> bool:
        """Return whether a stream belongs to an earlier file.

        Parameters
        ----------
        stream : int
            Stream id.

        Returns
        -------
        bool
            True where nothing of it is kept any more.
        """
        return stream in self._closed

    def join(self, stream: int, index: int, place: int) -> None:
        """Give a stream its place.

        Parameters
        ----------
        stream, index : int
            Stream id, and a sample by the board's counting.
        place : int
            Where that sample stands on the grid.
        """
        self._offsets[stream] = place - index

    def place(self, stream: int, index: int) -> int:
        """Return where a sample stands on the grid of the present file.

        Parameters
        ----------
        stream, index : int
            Stream id, and the sample by the board's counting.

        Returns
        -------
        int
            Below 0 for a sample from before the present file.
        """
        return index + self._offsets[stream]

    def index(self, stream: int, place: int) -> int:
        """Return the board's index of a place on the grid.

        Parameters
        ----------
        stream, place : int
            Stream id, and the place on the grid of the present file.

        Returns
        -------
        int
            By the counting of that stream.
        """
        return place - self._offsets[stream]

    def reach(self, place: int) -> None:
        """Take note that the grid goes up to this place at least.

        Parameters
        ----------
        place : int
            Grid index after a sample.
        """
        self.reached = max(self.reached, place)

    def end_file(self, length: int, going_on: int | None = None) -> None:
        """Begin the grid of another file.

        Parameters
        ----------
        length : int
            Grid samples of the file that ends.
        going_on : int, optional
            The one stream that may go on in the next file; it has to join again.
        """
        assert self.announcement is not None  # noqa: S101  # there is a file to end
        self.earlier += length
        self.earlier_s += length / self.announcement.rate_hz
        self.reached = 0
        self._closed |= self._offsets.keys() - {going_on}
        self._offsets.clear()
