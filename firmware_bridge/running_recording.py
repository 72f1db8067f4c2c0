"""A recording while it is made: files, the grid of their samples, stamps and remarks."""

from typing import TYPE_CHECKING

from firmware_bridge.announced_frame import is_alike
from firmware_bridge.announcement import Announcement
from firmware_bridge.discard_tally import DiscardTally
from firmware_bridge.envelope import Discarded
from firmware_bridge.host_clock import ELAPSED_U_S, HostClock, missing_before
from firmware_bridge.host_note import End, Join, Remark
from firmware_bridge.recording_files import RecordingFiles
from firmware_bridge.recording_grid import RecordingGrid

if TYPE_CHECKING:
    from firmware_bridge.line_frames import Pause

__all__ = ["RunningRecording"]


class RunningRecording:
    """Begin, go on with and end files, each stream in its place, and say in them what happened.

    Parameters
    ----------
    files : RecordingFiles
        Where it is written.
    grid : RecordingGrid
        Where its samples stand.
    """

    def __init__(self, files: RecordingFiles, grid: RecordingGrid) -> None:
        self.files, self.grid = files, grid
        self.clock = HostClock()
        self.discards = DiscardTally()
        self.pauses: dict[int, Pause] = {}
        """Of streams that have not begun: what is missing before them."""
        self.is_complete = False
        """True once the duration or the size is reached."""

    def remark(self, text: str) -> None:
        """Write a remark, if there is a file.

        Parameters
        ----------
        text : str
            For people.
        """
        if self.files.is_open:
            self.files.note(Remark(text))

    def discard(self, piece: Discarded) -> None:
        """Count what is thrown away, to be said with the next stamp.

        Parameters
        ----------
        piece : Discarded
            How long it was, and why.
        """
        self.discards.add(piece, has_begun=bool(self.files.paths))

    def discard_message(self, message: bytes, reason: str) -> None:
        """Count a message that is not kept, as long as it was on the wire.

        Parameters
        ----------
        message : bytes
            Content and CRC.
        reason : str
            Why.
        """
        self.discard(Discarded.message(message, reason))

    def stamp(self) -> None:
        """Write when the last samples came, if there is a file and any came."""
        stamp = self.clock.maybe_stamp() if self.files.is_open else None
        if stamp is not None:
            self.files.note(stamp)

    def stamp_first(self) -> None:
        """Write the first stamp of a file, unless it is there."""
        if not self.clock.has_stamped:
            self.stamp()

    def tick(self) -> None:
        """Do what is due by the host's clock: stamp, remarks, having the records on the disk."""
        if not self.files.is_open:
            return
        if self.clock.is_due:
            self.stamp()
            self.discards.say(self.remark)
        self.files.sync_if_due()

    def is_unlike(self, announcement: Announcement) -> bool:
        """Return whether a stream cannot stand in the present file.

        Parameters
        ----------
        announcement : Announcement
            Of the stream.

        Returns
        -------
        bool
            True for another rate, format or set of channels.
        """
        present = self.grid.announcement
        return present is not None and not is_alike(present, announcement)

    def end_file(self) -> None:
        """Close the present file where the board has come so far; the next stream begins another."""
        self.close()
        self.grid.end_file(self.grid.reached)
        self.clock.forget()

    def begin_stream(
        self, announcement: Announcement, stream: int, index: int, length: int
    ) -> None:
        """Give a stream its place: in a new file, else behind the pause that the clock tells.

        Parameters
        ----------
        announcement : Announcement
            Of the stream.
        stream, index, length : int
            Its id, and its first samples.
        """
        self.grid.announcement = announcement
        if self.grid.wanted is not None and self.grid.wanted <= 0:
            self.is_complete = True  # the file before reached the end, but for rounding
            return
        place, place_u = 0, 0.0
        if self.files.is_open:
            place, place_u = self._place_after_pause(announcement, stream, length)
        else:
            self.files.begin(announcement, self.clock.now_ns[1])
        self._join(stream, index, place, place_u)

    def _place_after_pause(
        self, announcement: Announcement, stream: int, length: int
    ) -> tuple[int, float]:
        """Return where a stream begins on the grid, and the standard uncertainty of that."""
        reached = self.grid.reached
        if stream in self.pauses:
            pause = self.pauses.pop(stream)
            return reached + pause.length, pause.length_u
        rate_hz = announcement.rate_hz * announcement.speed
        missing = missing_before(length, self.clock.since_s, rate_hz)
        return reached + missing, ELAPSED_U_S * rate_hz

    def _join(self, stream: int, index: int, place: int, place_u: float) -> None:
        self.grid.join(stream, index, place)
        self.files.note(Join(stream, index, place, place_u))

    def is_full(self, stream: int, index: int) -> bool:
        """Return whether the present file ends before this sample, as its rotation asks.

        Parameters
        ----------
        stream, index : int
            Stream id, and the sample by the board's counting.

        Returns
        -------
        bool
            False for one that comes late: it belongs to what has been.
        """
        assert self.grid.rate_hz is not None  # noqa: S101  # a file has begun
        place = self.grid.place(stream, index)
        is_late = place < max(1, self.grid.reached)
        return not is_late and self.files.is_due(place / self.grid.rate_hz)

    def rotate(self, stream: int, index: int) -> None:
        """End the present file before a sample and go on with it in the next one.

        Parameters
        ----------
        stream, index : int
            Stream id, and the sample by the board's counting.
        """
        assert self.grid.announcement is not None  # noqa: S101  # a file has begun
        # The end says that what is missing before this sample is missing in the file that ends.
        self.files.note(End(stream, index))
        length = self.grid.place(stream, index)
        self.close()
        self.grid.end_file(length, going_on=stream)
        self.files.begin(self.grid.announcement, self.clock.now_ns[1])
        self._join(stream, index, 0, 0.0)
        self.clock.renew()
        self.files.rotated()

    def close(self, *, is_as_asked: bool = True) -> None:
        """Close the present file, if there is one: its end, the last stamp, what was discarded.

        Parameters
        ----------
        is_as_asked : bool
            False where the port or the file failed: the file then gets no end.
        """
        if not self.files.is_open:
            return
        if is_as_asked and not self.files.has_end:
            self.files.note(End(*self.grid.last_end))
        self.stamp()
        self.discards.say(self.remark)
        self.files.close()
