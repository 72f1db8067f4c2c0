"""A recording in an .mfr file: opened once with every CRC checked, then read in any stretch."""

import os
from collections.abc import Sequence
from math import isfinite
from typing import Any

import numpy as np
from numpy.typing import NDArray

from firmware_bridge.channel import Channel
from firmware_bridge.gap import Gap
from firmware_bridge.gap_reason import counted
from firmware_bridge.host_note import End, Join, Pieces, Remark, Stamp, parse_host_note
from firmware_bridge.line_clock import FrameClocks, LineClock
from firmware_bridge.message import MessageError, MessageType, Note, parse_message
from firmware_bridge.record_file import RecordFile
from firmware_bridge.record_index import RecordIndex, lengths
from firmware_bridge.recording_header import RecordingError
from firmware_bridge.span import Span
from firmware_bridge.timing import Timing
from firmware_bridge.trace import Recording

__all__ = ["NO_END", "MfrRecording", "NoSampleError", "open_mfr"]

NO_END = "the recording did not end as asked: it was cut, the port failed, or it still goes on"
"""What is said of a recording without an end."""

_NEAR = 16384  # samples
_LENGTH_MAX = 1 << 53  # indices and lengths stay exact as int64 and as float64


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
        self.stamps: list[Stamp] = []
        """The host's clock beside the board's counting."""
        self.notes: list[Note | Remark] = []
        self.damaged = 0
        """Records whose CRC does not fit."""
        self.duplicates = 0
        """Samples records that were there twice."""
        self.lock_ins = 0
        """Lock-in results; `LockInRecording` reads them."""
        self._joins: dict[int, Join] = {}
        self._end: End | None = None
        self._clocks = self._maybe_clocks()
        index = self._scan()
        self._flagged = index.flagged
        self._runs, length, gaps = self._place(index)
        announced = self.header.announcement
        clock = LineClock(announced.rate_hz, None, Timing())
        if self._clocks is not None:
            clock = self._clocks.fit()
        super().__init__(
            path=str(path),
            format="mfr",
            rate_hz=clock.rate_hz,
            rate_u_hz=clock.rate_u_hz,
            timing=clock.timing,
            channels=[Channel(c.name, c.unit, c.scale, c.offset) for c in announced.channels],
            length=length,
            gaps=gaps,
            remarks=self._say(),
            columns=self._columns_printed(),
            start_unix_s=self._started(),
        )
        self.over_range = self._count_over_range()

    @property
    def has_end(self) -> bool:
        """True if the file says that the recording ended as asked."""
        return self._end is not None

    def _scan(self) -> RecordIndex:
        index, pieces = RecordIndex(self.file.slots), Pieces()
        for chunk in self.file.chunks():
            self.damaged += chunk.damaged
            index.add(chunk)
            if self._clocks is not None:
                self._clocks.add(chunk.heads[chunk.samples])
            for _, message in chunk.messages:
                self._take(message, pieces)
        return index

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

    def _take(self, message: bytes, pieces: Pieces) -> None:
        try:
            if message[0] == MessageType.PIECE:
                whole = pieces.put(message)
                if whole is not None:
                    self._take(whole, pieces)
                return
            if message[0] < MessageType.PIECE:
                self.lock_ins += message[0] == MessageType.LOCK_IN
                if message[0] == MessageType.NOTE:
                    note = parse_message(message)
                    assert isinstance(note, Note)  # noqa: S101  # the type byte says so
                    self.notes.append(note)
                return
            host = parse_host_note(message)
        except MessageError:
            self.damaged += 1
            return
        match host:
            case Stamp():
                self.stamps.append(host)
            case Join():
                self._joins[host.stream] = host
            case End():
                self._end = host
            case Remark():
                self.notes.append(host)

    def _place(self, index: RecordIndex) -> tuple[NDArray[Any], int, list[Gap]]:
        """Put the streams one behind the other on the grid; return runs, length and gaps."""
        placed: list[NDArray[Any]] = []
        gaps: list[Gap] = []
        reached = 0
        for stream in index.streams():
            found = index.placed(stream)
            self.duplicates += found.duplicates
            runs = found.runs
            first = int(runs["index"][0])
            start, length_u = reached, 0.0
            join = self._joins.get(stream)
            if join is not None and placed:
                start, length_u = max(reached, join.grid + first - join.index), join.grid_u
            last = int(np.argmax(runs["index"]))  # before the counter can wrap in the sums below
            behind = int(lengths(runs[last : last + 1], self.file.slots)[0])
            self._check_span(int(runs["index"][last]) + behind - first + start)
            if placed:
                gaps.append(Gap(reached, start - reached, exact=False, length_u=length_u))
            runs["index"] = runs["index"] - np.uint64(first) + np.uint64(start)
            reached = int(runs["index"][-1]) + int(lengths(runs[-1:], self.file.slots)[0])
            self._check_span(reached)
            gaps += _gaps_inside(runs, self.file.slots)
            if self._end is not None and self._end.stream == stream:
                end = self._end.index - first + start
                if end > reached:
                    gaps.append(Gap(reached, end - reached))
                    reached = end
            self._check_span(reached)
            placed.append(runs)
        if not placed:
            only = f", only {counted(self.lock_ins, 'lock-in result')}" if self.lock_ins else ""
            raise NoSampleError(f"{self.file.path} holds no sample{only}")
        return np.concatenate(placed), reached, gaps

    def _check_span(self, reached: int) -> None:
        if reached > _LENGTH_MAX:
            raise RecordingError(f"{self.file.path} spans {reached} samples, more than can be true")

    def _started(self) -> float | None:
        for stamp in self.stamps[:1]:
            first = self._board_index(stamp.stream)
            speed = self.header.announcement.speed * self.header.announcement.rate_hz
            if first is not None and speed > 0:
                before_s = (stamp.index - first) / speed
                return stamp.unix_ns / 1e9 - before_s if isfinite(before_s) else None
        return self.header.created_ns / 1e9 if self.header.created_ns else None

    def _board_index(self, stream: int) -> int | None:
        join = self._joins.get(stream)
        return None if join is None else join.index - join.grid

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
            (len(self._joins) > 1, "the board was restarted or reconnected"),
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
        wanted = list(channels)
        values = np.full((stop - start, len(wanted)), np.nan)
        over_range = 0
        ends = self._runs["index"].astype(np.int64) + lengths(self._runs, self.file.slots)
        first = int(np.searchsorted(ends, start, "right"))
        for run in self._runs[first:]:
            if int(run["index"]) >= stop:
                break
            over_range += self._read_run(run, wanted, start, stop, values)
        return Span(values, over_range)

    def _read_run(
        self,
        run: Any,  # noqa: ANN401  # a row of RUN
        wanted: list[int],
        start: int,
        stop: int,
        values: NDArray[np.float64],
    ) -> int:
        slots, origin = self.file.slots, int(run["index"])
        length = (int(run["records"]) - 1) * slots + int(run["last"])
        begin, end = max(start, origin), min(stop, origin + length)
        record = (begin - origin) // slots
        over_range = 0
        while begin < end:
            last = (end - 1 - origin) // slots
            rows = self.file.rows(int(run["record"]) + record, last - record + 1)
            counts = self.file.counts(rows)
            skip = begin - origin - record * slots
            take = min(end - begin, len(counts) - skip)
            part = values[begin - start : begin - start + take]
            self._scale(counts[skip : skip + take], wanted, part)
            hit = self._over(int(run["record"]) + record, counts, skip, take)
            if hit is not None:
                part[hit[:, wanted]] = np.nan
                over_range += int(np.count_nonzero(hit[:, wanted]))
            begin += take
            record += len(rows)
        return over_range

    def _scale(self, counts: NDArray[Any], wanted: list[int], out: NDArray[np.float64]) -> None:
        for column, position in enumerate(wanted):
            channel = self.channels[position]
            np.multiply(counts[:, position], channel.scale, out=out[:, column])
            if channel.offset:
                out[:, column] += channel.offset

    def _over(
        self, record: int, counts: NDArray[Any], skip: int, take: int
    ) -> NDArray[np.bool_] | None:
        """Return which of the samples are over-range, shape (take, channels), or None if none."""
        slots = self.file.slots
        near = slice(*np.searchsorted(self._flagged, [record, record + len(counts) // slots]))
        rows = self._flagged[near] - record
        if not rows.size:
            return None
        low, high = self._limits()
        framed = counts.reshape(-1, slots, counts.shape[1])[rows]
        hit = (framed <= low) | (framed >= high)
        # A flagged frame with no sample at an end of the range: any of them may be the one.
        hit[~hit.any(axis=(1, 2))] = True
        marks = np.zeros((len(counts) // slots, slots, counts.shape[1]), bool)
        marks[rows] = hit
        return marks.reshape(counts.shape)[skip : skip + take]

    def _limits(self) -> tuple[NDArray[np.int64], NDArray[np.int64]]:
        announced = self.header.announcement
        low, high = announced.code_limits
        lows = [low if c.low is None else c.low for c in announced.channels]
        highs = [high if c.high is None else c.high for c in announced.channels]
        return np.array(lows), np.array(highs)

    def _count_over_range(self) -> int:
        total, slots = 0, self.file.slots
        everything = list(range(len(self.channels)))
        for run in self._runs if self._flagged.size else self._runs[:0]:
            inside = np.searchsorted(self._flagged, [run["record"], run["record"] + run["records"]])
            starts = (self._flagged[slice(*inside)] - run["record"]) * slots + int(run["index"])
            # Flagged frames near each other are read together, so that nothing is read twice.
            for near in np.split(starts, np.flatnonzero(np.diff(starts // _NEAR)) + 1):
                if near.size:
                    stop = min(int(near[-1]) + slots, self.length)
                    total += self.read(everything, int(near[0]), stop).over_range
        return total


def _gaps_inside(runs: NDArray[Any], slots: int) -> list[Gap]:
    ends = runs["index"][:-1] + lengths(runs, slots)[:-1].astype(np.uint64)
    missing = runs["index"][1:] - ends
    return [Gap(int(ends[k]), int(missing[k])) for k in np.flatnonzero(missing).tolist()]


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
