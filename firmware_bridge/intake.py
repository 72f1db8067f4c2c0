"""From messages to files: what a recording does with each message, without ports or threads."""

import os
from collections import Counter
from collections.abc import Callable
from dataclasses import replace
from pathlib import Path

from firmware_bridge.announcement import Announcement, parse_announcement
from firmware_bridge.cobs import encode
from firmware_bridge.decoder import Decoder, Event, Samples, parse_samples, renamed
from firmware_bridge.envelope import Discarded, seal
from firmware_bridge.frame import HEADER
from firmware_bridge.host_note import End, Join, Remark, Stamp
from firmware_bridge.line_frames import Pause
from firmware_bridge.live_events import LiveBlock, block_of
from firmware_bridge.message import (
    WIRE_VERSION,
    LockIn,
    MessageError,
    MessageType,
    parse_message,
)
from firmware_bridge.recording_header import Header
from firmware_bridge.rotation import Rotation
from firmware_bridge.trace import Gap
from firmware_bridge.writer import Writer

__all__ = ["Intake"]

_STAMP_NS = 2_000_000_000
_PENDING_BYTES = 4 << 20
_LAST_NOTES = 4
_INDEX_MAX = 1 << 62  # 36 000 years at 4 MHz
_ARRIVAL_U_S = 0.05 / 3**0.5
"""Standard uncertainty of a frame's arrival: half a system tick and a driver's buffering, ±50 ms at
most, rectangular. Our estimate."""

_FILLED = HEADER.fields["filled"][1] if HEADER.fields else 0


class Intake:
    """Write what a board sends into a recording, and count.

    The file is made when the board has announced itself. Messages go into it as they came; the
    decoder only counts. When the board comes back under a new stream id the same recording goes
    on, its place found by the host's clock; another rate or channel set goes on in another file.

    Parameters
    ----------
    path : path-like
        The first file.
    info : dict of str to str
        For the header.
    duration_s : float, optional
        End after round(duration · rate) samples of the board.
    size_bytes : int, optional
        End before all files together become larger.
    overwrite : bool
        Replace an existing file.
    rotation : Rotation, optional
        When to go on in a next file, and in which.
    on_block : callable, optional
        Takes a `LiveBlock` for each frame kept, in order but for frames that come late.
    """

    def __init__(
        self,
        path: str | os.PathLike[str],
        *,
        info: dict[str, str] | None = None,
        duration_s: float | None = None,
        size_bytes: int | None = None,
        overwrite: bool = False,
        rotation: Rotation | None = None,
        on_block: Callable[[LiveBlock], None] | None = None,
    ) -> None:
        self._path = Path(path)
        self._rotation = rotation or Rotation()
        self._on_block = on_block
        self._info = info or {}
        self._duration_s = duration_s
        self._size_bytes = size_bytes
        self._earlier_bytes = 0
        self._overwrite = overwrite
        self._writer: Writer | None = None
        self._announced: dict[int, Announcement] = {}
        self._current: Announcement | None = None
        self._pauses: dict[int, Pause] = {}
        self._grid: dict[int, int] = {}  # stream: grid index of the board's index 0
        self._closed_streams: set[int] = set()  # those of earlier files
        self.earlier_s = 0.0
        """Their length by the board's counting [s]."""
        self._pending: list[bytes] = []
        self._decoder = Decoder()
        self._now_ns = (0, 0)
        self._last_ns = (0, 0)  # monotonic time and UTC of the last samples frame
        self._stamped_ns = 0
        self._reached = 0  # grid index after the last sample
        self._last: Samples | None = None
        self._mark: tuple[int, int, int] | None = None  # stream, index after the last sample, clock
        self._unsaid: Counter[str] = Counter()
        self._placed: list[Event] = []
        self._was_away = False
        self._latest: Announcement | None = None
        self._has_end = False  # written into the present file
        self.files: list[Path] = []
        """The files written, in order."""
        self.samples = 0
        """Samples received, all files together."""
        self.every_s = 0.0
        """From one lock-in result to the next, where the board sends nothing else."""
        self.lock_ins = 0
        """Lock-in results received."""
        self.earlier = 0
        """Grid samples in the files before the present one."""
        self.gaps = 0
        self.flagged = 0
        """Frames flagged as over-range."""
        self.bytes_discarded = 0
        self.discarded_midway = 0
        """Of these the bytes between two frames that were kept; frames received twice not counted."""
        self._discarded_since = 0  # the last frame that was kept
        self.is_complete = False
        """True once the duration or the size is reached."""

    @property
    def is_announced(self) -> bool:
        """Whether the board's announcement for what it sends now is known."""
        return self._writer is not None and not self._pending

    @property
    def announcement(self) -> Announcement | None:
        """What the board said last about itself, None from the port's loss until it speaks again."""
        return self._latest

    @property
    def bytes_written(self) -> int:
        """Length of all files together, with what still waits to be written."""
        return self._earlier_bytes + (0 if self._writer is None else self._writer.bytes)

    @property
    def is_known(self) -> bool:
        """Whether any board has announced itself."""
        return bool(self._announced)

    @property
    def wanted(self) -> int | None:
        """Grid samples the present file shall have, None without duration or announcement."""
        if self._duration_s is None or self._current is None:
            return None
        return round((self._duration_s - self.earlier_s) * self._current.rate_hz)

    @property
    def reached(self) -> int:
        """Grid samples so far, all files together."""
        return self.earlier + self._reached

    @property
    def rate_hz(self) -> float | None:
        """Announced rate, None before the announcement."""
        return None if self._current is None else self._current.rate_hz

    def take(
        self, piece: bytes | Discarded | Pause | Remark, monotonic_ns: int, unix_ns: int
    ) -> None:
        """Take one unwrapped message, or what the unwrapper discarded, with its time of arrival.

        Parameters
        ----------
        piece : bytes, Discarded, Pause or Remark
            Content and CRC, or what was thrown away; from lines of text also a pause that is
            known better than by the arrival of frames, and remarks.
        monotonic_ns, unix_ns : int
            The host's clocks at its arrival.

        Raises
        ------
        BridgeError
            If the file cannot be made (exit code 2) or written any further (3).
        """
        self._now_ns = (monotonic_ns, unix_ns)
        if self.is_complete:
            return
        if isinstance(piece, Discarded):
            self._discard(piece)
        elif isinstance(piece, Pause):
            self._pauses[piece.stream] = piece
        elif isinstance(piece, Remark):
            self.remark(piece.text)
        elif piece[1] != WIRE_VERSION or piece[0] >= MessageType.PIECE:
            self._discard_message(piece, f"message type {piece[0]:#04x}, wire version {piece[1]}")
        elif piece[0] == MessageType.ANNOUNCEMENT:
            self._announcement(piece)
        elif piece[0] == MessageType.SAMPLES:
            self._frame(piece)
        elif piece[0] == MessageType.LOCK_IN:
            self._lock_in(piece)
        elif self._writer is not None and piece[0] != MessageType.COMMAND:
            # Commands are our own, come back on a port that loops or echoes.
            self._writer.append(piece)

    def tick(self, monotonic_ns: int, unix_ns: int) -> None:
        """Do what is due by time: host stamps, remarks, and having the records on the disk.

        Parameters
        ----------
        monotonic_ns, unix_ns : int
            The host's clocks now.
        """
        self._now_ns = (monotonic_ns, unix_ns)
        if self._writer is None:
            return
        if monotonic_ns - self._stamped_ns >= _STAMP_NS:
            self._stamp()
            self._say_discarded()
        self._writer.sync(if_due=True)

    def remark(self, text: str) -> None:
        """Write a remark into the recording, if there is one yet.

        Parameters
        ----------
        text : str
            For people.
        """
        if self._writer is not None:
            self._writer.note(Remark(text))

    def away(self) -> None:
        """Take note that the port was away: nothing from before will come any more."""
        self._was_away = True
        self._latest = None

    def close(self, *, is_as_asked: bool = True) -> None:
        """Close the recording: the last stamp, what was discarded, everything on the disk.

        Parameters
        ----------
        is_as_asked : bool
            Whether it ends by its duration or size, or because someone ended it; else the port or
            the file failed, and the recording holds no end.
        """
        for each in self._decoder.strays():
            self._admitted(*each)
        for event in self._decoder.close():
            if isinstance(event, Gap):
                self.gaps += bool(event.length)
            elif isinstance(event, Samples):
                self._count(event)  # held until now, for a frame that never came
        self._close_file(is_as_asked)

    def _close_file(self, is_as_asked: bool = True) -> None:  # private, named at the definition
        if self._writer is None:
            return
        if is_as_asked and not self._has_end:
            stream = next(reversed(self._grid))
            self._writer.note(End(stream, max(0, self._reached - self._grid[stream])))
        self._has_end = False
        self._stamp()
        self._say_discarded()
        self._earlier_bytes += self._writer.bytes
        self._writer.close()
        self._writer = None

    def _announcement(self, message: bytes) -> None:
        try:
            announcement = parse_announcement(message)
        except MessageError as error:
            self._discard_message(message, str(error))
            return
        self._announced[announcement.stream] = self._latest = announcement
        self._decoder.accept(message)
        waiting, self._pending = self._pending, []
        for early in waiting:
            if early[0] == MessageType.SAMPLES:
                self._frame(early)
            else:
                self._lock_in(early)

    def _frame(self, message: bytes) -> None:
        try:
            frame = parse_samples(message)
        except MessageError as error:
            self._discard_message(message, str(error))
            return
        if frame.index + len(frame.data) > _INDEX_MAX:
            self._discard_message(message, f"an index beyond any board's ({frame.index})")
            return
        if frame.stream not in self._announced:
            self._wait_for_announcement(message)
            return
        for each in self._decoder.admit(frame, message):
            self._admitted(*each)

    def _admitted(self, frame: Samples, message: bytes) -> None:
        announcement = self._announcement_of(frame.stream)
        if frame.stream in self._closed_streams or not _fits(message, announcement):
            self._discard_message(message, "a frame unlike the announcement of this recording")
            return
        if frame.stream not in self._grid:
            self._begin(announcement, frame.stream, frame.index, len(frame.data))
        if not self.is_complete:
            self._keep(message, frame)

    def _announcement_of(self, stream: int) -> Announcement:
        """Return the announcement of a stream that has one, also where it began again."""
        if stream not in self._announced:
            sent = self._decoder.sent_as(stream)
            self._announced[stream] = replace(self._announced[sent], stream=stream)
            self.remark(
                f"the board began again under its stream id {sent}; it goes by {stream} here"
            )
        return self._announced[stream]

    def _wait_for_announcement(self, message: bytes) -> None:
        self._pending.append(message)
        while sum(map(len, self._pending)) > _PENDING_BYTES:
            self._discard_message(self._pending.pop(0), "frames without an announcement")

    def _lock_in(self, message: bytes) -> None:
        """Take a lock-in result: it says how far the board is where it sends no samples."""
        try:
            result = parse_message(message)
        except MessageError as error:
            self._discard_message(message, str(error))
            return
        assert isinstance(result, LockIn)  # noqa: S101  # the type byte says so
        if result.index + result.length > _INDEX_MAX:
            self._discard_message(message, f"an index beyond any board's ({result.index})")
            return
        if result.stream not in self._announced:
            self._wait_for_announcement(message)
            return
        result, message = self._renamed(result, message)
        announcement = self._announcement_of(result.stream)
        if result.stream in self._closed_streams:
            return
        if result.stream not in self._grid:
            self._begin(announcement, result.stream, result.index, result.length)
        if self._writer is None or self.is_complete:
            return
        if not self._has_room(self._writer, len(message)):
            self.is_complete = True
            return
        if self._is_full(self._writer, result.stream, result.index):
            self._rotate(result.stream, result.index)
        self._writer.append(message)
        self.lock_ins += 1
        self._last_ns = self._now_ns
        if self._last is None:
            self._advance(result)

    def _renamed(self, result: LockIn, message: bytes) -> tuple[LockIn, bytes]:
        """Return a result under the id by which its stream goes; results never come late."""
        name = self._decoder.name_of(result.stream)
        mark, end = self._mark, result.index + result.length
        if self._last is None and mark is not None and mark[0] == name and end <= mark[1]:
            name = self._decoder.rename(name)
        if name == result.stream:
            return result, message
        return replace(result, stream=name), renamed(message, name)

    def _advance(self, result: LockIn) -> None:
        """Count the samples that a result stands for, of a board that sends nothing else."""
        end = result.index + result.length
        if self._current is not None:
            self.every_s = result.length / (self._current.rate_hz * self._current.speed)
        self._mark = (result.stream, end, 0)
        self._reached = max(self._reached, end + self._grid[result.stream])
        self.is_complete = self.wanted is not None and self._reached >= self.wanted
        if not self._stamped_ns:
            self._stamp()

    def _begin(self, announcement: Announcement, stream: int, index: int, length: int) -> None:
        """Begin a stream: in a new file where its layout differs, else where the clock says."""
        # What is held would make the place of what follows too early.
        self._follow(self._decoder.flush())
        if self._current is not None and not _alike(self._current, announcement):
            self._close_file()
            self.earlier += self._reached
            self.earlier_s += self._reached / self._current.rate_hz
            self._reached = 0
            self._closed_streams |= self._grid.keys()
            self._grid.clear()
            self._last = self._mark = None
        is_first = self._writer is None
        self._current = announcement
        if self.wanted is not None and self.wanted <= 0:
            self.is_complete = True  # the file before reached the end, but for rounding
            return
        grid, grid_u = 0, 0.0
        if is_first:
            self._open(announcement)
        elif stream in self._pauses:
            pause = self._pauses.pop(stream)
            grid, grid_u = self._reached + pause.length, pause.length_u
        else:
            rate = announcement.rate_hz * announcement.speed
            elapsed = round((self._now_ns[0] - self._last_ns[0]) * 1e-9 * rate)
            grid = max(self._reached, self._reached + elapsed - length)
            grid_u = _ARRIVAL_U_S * 2**0.5 * rate
        self._join(stream, index, grid, grid_u)

    def _open(self, announcement: Announcement) -> None:
        info = {**self._info, "follows": self.files[-1].name} if self.files else self._info
        self._writer = Writer(
            self._next_path(),
            Header(announcement, self._now_ns[1], info),
            overwrite=self._overwrite and not self.files,
        )
        self.files.append(self._writer.path)

    def _join(self, stream: int, index: int, grid: int, grid_u: float) -> None:
        self._grid[stream] = grid - index
        assert self._writer is not None  # noqa: S101  # made before
        self._writer.note(Join(stream, index, grid, grid_u))

    def _next_path(self) -> Path:
        if self.files and self._rotation.next_path is not None:
            return Path(self._rotation.next_path(len(self.files) + 1))
        number = len(self.files) + 1
        while number > 1:
            path = self._path.with_stem(f"{self._path.stem}-{number}")
            if not path.exists():
                return path
            number += 1
        return self._path

    def _keep(self, message: bytes, frame: Samples) -> None:
        assert self._writer is not None  # noqa: S101  # _begin made it
        if not self._has_room(self._writer, len(message)):
            self.is_complete = True
            return
        if self._is_full(self._writer, frame.stream, frame.index):
            self._rotate(frame.stream, frame.index)
        start = frame.index + self._grid[frame.stream]
        if start < 0 and self._was_written(frame, message):
            return  # in the file before
        room = None if self.wanted is None else self.wanted - start
        if room is None or room > 0:
            if room is not None and len(frame.data) > room:
                message = _shortened(message, room, frame)
            self._writer.append(message)
        self.discarded_midway += self._discarded_since
        self._discarded_since = 0
        self._last_ns = self._now_ns
        events = self._placed or self._decoder.place(frame, message)
        self._placed = []
        if self._was_away:
            events += self._decoder.flush()
            self._was_away = False
        self._follow(events)
        if not self._stamped_ns:
            self._stamp()

    def _was_written(self, frame: Samples, message: bytes) -> bool:
        """Return whether a frame from before the present file came twice; else keep its events."""
        events = self._decoder.place(frame, message)
        if any(isinstance(event, Discarded) for event in events):
            self._follow(events)
            return True
        self._placed = events
        return False

    def _is_full(self, writer: Writer, stream: int, index: int) -> bool:
        """Return whether the present file ends before this sample, as its rotation asks."""
        assert self._current is not None  # noqa: S101  # a file has begun
        start = index + self._grid[stream]
        if start < max(1, self._reached):  # a late one belongs to what has been
            return False
        next_bytes = writer.bytes + (1 + _LAST_NOTES) * writer.record_bytes
        return self._rotation.is_due(next_bytes, start / self._current.rate_hz)

    def _rotate(self, stream: int, index: int) -> None:
        """End the present file before a sample and go on with it in the next one."""
        assert self._writer is not None  # noqa: S101  # there is a file to end
        assert self._current is not None  # noqa: S101
        # What is held comes out; what comes later still is kept in the next file.
        self._follow(self._decoder.flush())
        # The end says that what is missing before this sample is missing in the file that ends.
        self._writer.note(End(stream, index))
        self._has_end = True
        length = index + self._grid[stream]
        ended = self._writer.path
        self._close_file()
        self.earlier += length
        self.earlier_s += length / self._current.rate_hz
        self._reached = 0
        self._closed_streams |= self._grid.keys() - {stream}
        self._grid.clear()
        self._open(self._current)
        self._join(stream, index, 0, 0.0)
        self._stamped_ns = 0  # the next file needs a stamp of its own
        self._rotation.ended(ended)

    def _follow(self, events: list[Event]) -> None:
        for event in events:
            if isinstance(event, Discarded):
                self._discard(event)
            elif isinstance(event, Gap):
                self.gaps += 1
            elif isinstance(event, Samples):
                self._count(event)

    def _has_room(self, writer: Writer, length: int) -> bool:
        if self._size_bytes is None:
            return True
        # The last stamp and what was discarded are still to be said.
        return self._earlier_bytes + writer.bytes + (1 + _LAST_NOTES) * length <= self._size_bytes

    def _count(self, frame: Samples) -> None:
        if self.is_complete:
            return
        start = frame.index + self._grid[frame.stream]
        end = start + len(frame.data)
        if self.wanted is not None and end >= self.wanted:
            self._complete(frame, start)
            end = self.wanted
        if start < end:
            self.every_s = 0.0
            self.samples += end - start
            self.flagged += frame.over_range
            self._last = frame
            self._mark = (frame.stream, frame.index + len(frame.data), frame.clock)
            if self._on_block is not None and self._current is not None:
                block = block_of(frame, self._current, self.earlier + start, self._now_ns[1] * 1e-9)
                self._on_block(block.first(end - start))
        self._reached = max(self._reached, end)

    def _complete(self, frame: Samples, start: int) -> None:
        """Say where the recording ends, in the stream that covers its end."""
        assert self.wanted is not None  # noqa: S101  # else there is no end
        self.is_complete = True
        covering = frame if start < self.wanted or self._last is None else self._last
        if self._writer is not None:
            end = self.wanted - self._grid[covering.stream]
            self._writer.note(End(covering.stream, end))
            self._has_end = True

    def _discard_message(self, message: bytes, reason: str) -> None:
        self._discard(Discarded(len(encode(message)), reason))

    def _discard(self, piece: Discarded) -> None:
        self.bytes_discarded += piece.count
        if self.files and not piece.reason.startswith("duplicate"):
            self._discarded_since += piece.count
        self._unsaid[piece.reason.split(" index ")[0]] += piece.count

    def _say_discarded(self) -> None:
        for reason, count in self._unsaid.items():
            self.remark(f"{count} bytes discarded: {reason}")
        self._unsaid.clear()

    def _stamp(self) -> None:
        if self._writer is None or self._mark is None:
            return
        (stream, end, clock), (monotonic_ns, unix_ns) = self._mark, self._last_ns
        self._stamped_ns = self._now_ns[0]
        self._writer.note(Stamp(unix_ns, monotonic_ns, stream, end, clock))


def _alike(a: Announcement, b: Announcement) -> bool:
    return (a.rate_hz, a.format, a.slots, a.channels) == (b.rate_hz, b.format, b.slots, b.channels)


def _fits(message: bytes, announcement: Announcement) -> bool:
    # A frame may have fewer slots than announced: it is kept in a record of the full length.
    width, channels = message[13], message[12]
    slots = int.from_bytes(message[14:16], "little")
    announced = announcement.code_limits[1].bit_length() // 8 + 1
    return (
        channels == len(announcement.channels)
        and width == announced
        and slots <= announcement.slots
    )


def _shortened(message: bytes, filled: int, frame: Samples) -> bytes:
    """Return the frame with only its first ``filled`` samples, sealed anew."""
    width, channels = message[13], message[12]
    content = bytearray(message[:-4])
    content[_FILLED : _FILLED + 2] = filled.to_bytes(2, "little")
    start = HEADER.itemsize + filled * channels * width
    stop = HEADER.itemsize + len(frame.data) * channels * width
    content[start:stop] = bytes(stop - start)
    return seal(bytes(content))
