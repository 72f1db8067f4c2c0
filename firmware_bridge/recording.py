"""A recording in an .mfr file: opened once with every CRC checked, then read in any stretch."""

import os
from collections.abc import Sequence
from math import isfinite

from firmware_bridge.channel import Channel
from firmware_bridge.gap_reason import counted
from firmware_bridge.line_clock import FrameClocks, LineClock
from firmware_bridge.over_range import OverRange
from firmware_bridge.record_file import RecordFile
from firmware_bridge.record_index import RecordIndex
from firmware_bridge.recording_header import RecordingError
from firmware_bridge.recording_notes import RecordingNotes
from firmware_bridge.run_reader import RunReader
from firmware_bridge.span import Span
from firmware_bridge.stream_placing import StreamPlacing
from firmware_bridge.timing import Timing
from firmware_bridge.trace import Recording

__all__ = ["NO_END", "MfrRecording", "NoSampleError", "open_mfr"]

NO_END = "the recording did not end as asked: it was cut, the port failed, or it still goes on"
"""What is said of a recording without an end."""


class NoSampleError(RecordingError):
    """A recording without one sample; it may hold lock-in results."""


class MfrRecording(Recording):
    """An .mfr recording; see `Recording` and, for the file, SPEC.md.

    Parameters
    ----------
    path : path-like
        The file.

    Raises
    ------
    RecordingError
        If it is no recording, is damaged in its header, or holds no sample.
    """

    def __init__(self, path: str | os.PathLike[str]) -> None:
        self.file = RecordFile(path)
        self.header = self.file.header
        said = self._said = RecordingNotes()
        self.damaged = 0
        """Records whose CRC does not fit."""
        clocks = self._maybe_clocks()
        index = self._scan(clocks)
        self.damaged += said.damaged
        self.stamps = said.stamps
        """The host's clock beside the board's counting."""
        self.notes = said.texts
        """What the board and the host said to people."""
        self.lock_ins = said.lock_ins
        """Lock-in results; `LockInRecording` reads them."""
        placing = self._placed(index)
        self.duplicates = placing.duplicates
        """Samples records that were there twice."""
        announced = self.header.announcement
        clock = LineClock(announced.rate_hz, None, Timing()) if clocks is None else clocks.fit()
        self._reader = RunReader(self.file, placing.runs, OverRange(announced, index.flagged))
        super().__init__(
            path=str(path),
            format="mfr",
            rate_hz=clock.rate_hz,
            rate_u_hz=clock.rate_u_hz,
            timing=clock.timing,
            channels=[Channel(c.name, c.unit, c.scale, c.offset) for c in announced.channels],
            length=placing.reached,
            gaps=placing.gaps,
            over_range=self._reader.count_over_range(placing.reached),
            remarks=self._say(),
            reasons=[] if self.has_end else [NO_END],
            columns=self._columns_printed(),
            start_unix_s=self._started(),
        )

    @property
    def has_end(self) -> bool:
        """True if the file says that the recording ended as asked."""
        return self._said.end is not None

    def _scan(self, clocks: FrameClocks | None) -> RecordIndex:
        index = RecordIndex(self.file.slots)
        for chunk in self.file.chunks():
            self.damaged += chunk.damaged
            index.add(chunk)
            if clocks is not None:
                clocks.add(chunk.heads[chunk.samples])
            for _, message in chunk.messages:
                self._said.take(message)
        return index

    def _placed(self, index: RecordIndex) -> StreamPlacing:
        said = self._said
        placing = StreamPlacing(self.file.path, self.file.slots, said.joins, said.end)
        placing.place(index)
        if not placing.runs.size:
            only = f", only {counted(said.lock_ins, 'lock-in result')}" if said.lock_ins else ""
            raise NoSampleError(f"{self.file.path} holds no sample{only}")
        return placing

    def _maybe_clocks(self) -> FrameClocks | None:
        """Return what finds the rate of lines of text; boards that send frames announce theirs."""
        announced, origin = self.header.announcement, self.header.info
        if origin.get("source") != "text":
            return None
        return FrameClocks(origin, announced.rate_hz, announced.clock_hz)

    def _columns_printed(self) -> list[int] | None:
        """Return which columns of the lines of text the channels are, the time column counted."""
        numbers = self.header.info.get("columns", "").split()
        if len(numbers) != len(self.header.announcement.channels):
            return None
        return [int(number) for number in numbers] if all(map(str.isdecimal, numbers)) else None

    def _started(self) -> float | None:
        for stamp in self.stamps[:1]:
            first = self._said.maybe_origin(stamp.stream)
            speed = self.header.announcement.speed * self.header.announcement.rate_hz
            if first is not None and speed > 0:
                before_s = (stamp.index - first) / speed
                return stamp.unix_ns / 1e9 - before_s if isfinite(before_s) else None
        return self.header.created_ns / 1e9 if self.header.created_ns else None

    def _say(self) -> list[str]:
        said = [
            (self.damaged, f"{counted(self.damaged, 'damaged record')} left out"),
            (self.duplicates, f"{counted(self.duplicates, 'record')} there twice"),
            (not self.has_end, NO_END),
            (self.file.tail_bytes, f"the file ends within a record ({self.file.tail_bytes} bytes)"),
            (
                self.lock_ins,
                f"{counted(self.lock_ins, 'lock-in result')} beside (inspect --lock-in)",
            ),
            (len(self._said.joins) > 1, "the board was restarted or reconnected"),
            ("rate" in self.header.info, f"the rate is {self.header.info.get('rate')}"),
            ("time" in self.header.info, str(self.header.info.get("time"))),
            (self.header.announcement.simulated, "recorded from a simulated board"),
        ]
        return [text for is_so, text in said if is_so]

    def read(self, channels: Sequence[int], start: int, stop: int) -> Span:
        """Return samples ``start`` to ``stop`` (not included) of some channels; see `Recording`.

        Parameters
        ----------
        channels : sequence of int
            Positions in ``self.channels``.
        start, stop : int
            Grid indices.

        Returns
        -------
        Span
            Values and how many are over-range.
        """
        return self._reader.read(channels, start, stop)


def open_mfr(path: str | os.PathLike[str]) -> MfrRecording:
    """Open an .mfr recording; every CRC in it is checked here, once.

    Parameters
    ----------
    path : path-like
        The file.

    Returns
    -------
    MfrRecording
        Ready to be read.

    Raises
    ------
    RecordingError
        If it is no recording, is damaged in its header, or holds no sample.
    """
    return MfrRecording(path)
