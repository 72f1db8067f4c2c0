"""The samples of a recording that runs, counted in the order in which the decoder gives them out."""

from collections.abc import Callable

from firmware_bridge.announcement import Announcement
from firmware_bridge.decoder import Decoder, Event
from firmware_bridge.envelope import Discarded
from firmware_bridge.gap import Gap
from firmware_bridge.host_note import End
from firmware_bridge.live_events import LiveBlock, block_of
from firmware_bridge.message import LockIn
from firmware_bridge.running_recording import RunningRecording
from firmware_bridge.samples_frame import Samples

__all__ = ["CountedSamples"]


class CountedSamples:
    """Count what comes out of the decoder, and end the recording with the last sample wanted.

    Parameters
    ----------
    decoder : Decoder
        Holds frames that are ahead of their turn.
    recording : RunningRecording
        What they belong to.
    on_block : callable, optional
        Takes a `LiveBlock` for each frame counted.
    """

    def __init__(
        self,
        decoder: Decoder,
        recording: RunningRecording,
        on_block: Callable[[LiveBlock], None] | None,
    ) -> None:
        self._decoder, self._recording, self._on_block = decoder, recording, on_block
        self._last: Samples | None = None
        self.samples = 0
        """Samples received, all files together."""
        self.gaps = 0
        self.flagged = 0
        """Frames flagged as over-range."""
        self.every_s = 0.0
        """From one lock-in result to the next, where the board sends nothing else."""

    @property
    def are_any(self) -> bool:
        """Whether the present file has samples."""
        return self._last is not None

    def flush(self) -> None:
        """Count what the decoder holds: nothing missing will come any more."""
        self.follow(self._decoder.flush())

    def follow(self, events: list[Event]) -> None:
        """Count what the decoder has given out.

        Parameters
        ----------
        events : list of Event
            In order.
        """
        for event in events:
            if isinstance(event, Discarded):
                self._recording.discard(event)
            elif isinstance(event, Gap):
                self.gaps += 1
            elif isinstance(event, Samples):
                self._count(event)

    def finish(self, events: list[Event]) -> None:
        """Count what was held until the end, for frames that never came.

        Parameters
        ----------
        events : list of Event
            In order.
        """
        for event in events:
            if isinstance(event, Gap):
                self.gaps += bool(event.length)
            elif isinstance(event, Samples):
                self._count(event)

    def begin_stream(
        self, announcement: Announcement, stream: int, index: int, length: int
    ) -> None:
        """Begin a stream, in another file where its layout differs.

        Parameters
        ----------
        announcement : Announcement
            Of the stream.
        stream, index, length : int
            Its id, and its first samples.
        """
        # What is held would make the place of what follows too early.
        self.flush()
        if self._recording.is_unlike(announcement):
            self._recording.end_file()
            self._last = None
        self._recording.begin_stream(announcement, stream, index, length)

    def make_room(self, stream: int, index: int, message: bytes) -> bool:
        """Go on in the next file if it is time to; return whether there is room for a message.

        Parameters
        ----------
        stream, index : int
            Its stream id, and its first sample by the board's counting.
        message : bytes
            Content and CRC.

        Returns
        -------
        bool
            False where the recording is as large as it may be; it is then complete.
        """
        if not self._recording.files.has_room(len(message)):
            self._recording.is_complete = True
            return False
        if self._recording.is_full(stream, index):
            # What is held comes out; what comes later still is kept in the next file.
            self.flush()
            self._recording.rotate(stream, index)
        return True

    def count_result(self, result: LockIn) -> None:
        """Count the samples that a lock-in result stands for, of a board that sends nothing else.

        Parameters
        ----------
        result : LockIn
            Of a stream that has its place.
        """
        if self.are_any:
            return
        grid, end = self._recording.grid, result.index + result.length
        if grid.announcement is not None:
            self.every_s = result.length / (grid.announcement.rate_hz * grid.announcement.speed)
        self._recording.clock.mark(result.stream, end, 0)
        grid.reach(grid.place(result.stream, end))
        self._recording.is_complete = grid.is_full
        self._recording.stamp_first()

    def _count(self, frame: Samples) -> None:
        if self._recording.is_complete:
            return
        grid = self._recording.grid
        start = grid.place(frame.stream, frame.index)
        end = start + len(frame.data)
        if grid.wanted is not None and end >= grid.wanted:
            self._complete(frame, start, grid.wanted)
            end = grid.wanted
        if start < end:
            self._take(frame, start, end - start)
        grid.reach(end)

    def _complete(self, frame: Samples, start: int, wanted: int) -> None:
        """Say where the recording ends, in the stream that covers its end."""
        self._recording.is_complete = True
        last, grid = self._last, self._recording.grid
        # A rotated file may not know the stream of the last frame: that one is in the file before.
        covering = frame if start < wanted or last is None or last.stream not in grid else last
        if self._recording.files.is_open:
            end = max(0, grid.index(covering.stream, wanted))
            self._recording.files.note(End(covering.stream, end))

    def _take(self, frame: Samples, start: int, count: int) -> None:
        """Count the first samples of a frame, which begins at a place of the present file."""
        self.every_s = 0.0
        self.samples += count
        self.flagged += frame.over_range
        self._last = frame
        self._recording.clock.mark(frame.stream, frame.index + len(frame.data), frame.clock)
        grid = self._recording.grid
        if self._on_block is not None and grid.announcement is not None:
            unix_s = self._recording.clock.now_ns[1] * 1e-9
            block = block_of(frame, grid.announcement, grid.earlier + start, unix_s)
            self._on_block(block.first(count))
