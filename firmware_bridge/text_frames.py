"""Lines of numbers, as any first sketch prints them, to the messages of the wire as they arrive."""

import re
from collections.abc import Sequence

import numpy as np
from numpy.typing import NDArray

from firmware_bridge.calendar_stamps import stamps_to_seconds
from firmware_bridge.envelope import Discarded
from firmware_bridge.line_frames import FRAME_S, LOST, LineFrames, Pause, Piece
from firmware_bridge.stamp_reader import StampReader
from firmware_bridge.text_encoding import decode_line
from firmware_bridge.text_fields import maybe_number
from firmware_bridge.text_lines import Fault, LineReader
from firmware_bridge.text_opening import TextOpening, maybe_open_text

__all__ = ["Pause", "Piece", "TextFramer"]

_ENDS = re.compile(rb"[\r\n]+")
_WORDS = re.compile(r"[;,\s|:=]+")
_SETTLE_S = 2.0  # the host's stamps of single lines jitter by tens of milliseconds
_SETTLE_LINES = 8
_EARLY_MAX = 200_000
_LINE_MAX = 4096
_UNLIKE_MAX = 8  # lines of another shape in a row that are the board's new way to print


class TextFramer:
    """Frame lines of numbers, each line one sample of every column.

    The first lines tell the layout, the decimals (counts are the numbers times a power of ten),
    which column is the board's time, and the rate: by that column or by the host's clock. A first
    partial line is discarded, lines of text become notes. Where the board gives the time (or counts
    its lines) that tells what is missing; without it a damaged line is a missing sample and lost
    lines show only as a pause. A pause whose length is not exact begins a new stream.

    Parameters
    ----------
    stream : int
        Stream id to begin with.
    rate_hz : float, optional
        Lines per second, where known.
    """

    def __init__(self, stream: int, rate_hz: float | None = None) -> None:
        self._rate_hz = rate_hz
        self._rest = b""
        self._is_first = True  # the first line may have begun before we listened
        self._is_dated = False
        self._early: list[tuple[float, str]] = []
        self._early_numbers = 0
        self._unlike: list[tuple[float, str]] = []
        self._frames = LineFrames(stream)
        self._reading: _Reading | None = None
        self.origin: dict[str, str] = {"source": "text"}
        """What the header of the recording says; complete when the announcement comes out."""
        self.lines = 0
        """Lines of numbers so far."""
        self.damaged = 0
        """Lines that hold numbers and are no whole row."""

    @property
    def heard(self) -> int:
        """Lines of numbers so far, those before the layout was known included."""
        return self.lines + self._early_numbers

    @property
    def texts(self) -> int:
        """Lines of text so far."""
        return self._frames.texts

    def restart(self) -> None:
        """Forget a partial line: the port was away."""
        self._rest, self._is_first = b"", True
        if self._reading is not None:
            self._reading.placer.away()

    def feed(self, data: bytes, now_s: float) -> list[Piece]:
        """Return the messages that ``data``, received at ``now_s``, completes.

        Parameters
        ----------
        data : bytes
            Cut anywhere.
        now_s : float
            The host's clock at its arrival [s].

        Returns
        -------
        list of bytes, Discarded, Pause or Remark
            Sealed messages, what was thrown away, pauses, and what to remark.
        """
        *ended, self._rest = _ENDS.split(self._rest + data)
        out: list[Piece] = []
        if len(self._rest) > _LINE_MAX:
            out.append(Discarded(len(self._rest), "no line end in 4096 bytes: is this text?"))
            self._rest, self._is_first = b"", True
        if ended and self._is_first:
            self._is_first = False
            first = ended.pop(0)
            if first:
                out.append(Discarded(len(first), "first line, perhaps only a part of one"))
        lines = [decode_line(line) for line in ended if line.strip()]
        if lines:
            out += self._take(lines, now_s)
        return out + self.tick(now_s)

    def tick(self, now_s: float) -> list[Piece]:
        """Return the frame that is due by time, so that one leaves twice a second and more.

        Parameters
        ----------
        now_s : float
            The host's clock [s].

        Returns
        -------
        list of bytes, Discarded, Pause or Remark
            As from `feed`.
        """
        if self._reading is None:
            return []
        out = [piece for run in self._reading.placer.tick(now_s) for piece in self._frames.put(run)]
        is_due = self._frames.is_waiting and now_s - self._frames.begun_s >= FRAME_S
        return out + self._frames.frames() if is_due else out

    def finish(self) -> list[Piece]:
        """Return all that is waiting: nothing more will come.

        Returns
        -------
        list of bytes, Discarded, Pause or Remark
            As from `feed`.
        """
        out: list[Piece] = []
        if self._early:
            out += self._settle(self._early[-1][0], is_end=True)
        if self._reading is None:
            return out
        out += self._flushed()
        placer = self._reading.placer
        if placer.late_lines:
            self._frames.remark(
                f"{placer.late_lines} time stamps were late, by up to {placer.worst_late_s:.3g} s, "
                "and caught up: no gap"
            )
        return out + self._frames.closing()

    def _flushed(self) -> list[Piece]:
        assert self._reading is not None  # noqa: S101  # there is something to flush
        return [piece for run in self._reading.placer.flush() for piece in self._frames.put(run)]

    def _take(self, lines: list[str], now_s: float) -> list[Piece]:
        if self._reading is not None:
            return self._read(lines, now_s)
        self._early += [(now_s, line) for line in lines]
        self._early_numbers += sum(map(_has_numbers, lines))
        return self._settle(now_s)

    # The first lines.

    def _settle(self, now_s: float, *, is_end: bool = False) -> list[Piece]:
        is_time = self._rate_hz is not None or now_s - self._early[0][0] >= _SETTLE_S
        if not is_end and not (is_time and self._early_numbers >= _SETTLE_LINES):
            return self._forget() if len(self._early) > _EARLY_MAX else []
        lines = self._dated([line for _, line in self._early], fewest=2)
        arrivals = [arrived_s for arrived_s, _ in self._early]
        opening = maybe_open_text(lines, arrivals, self._rate_hz)
        if opening is None:
            return self._forget()
        self._reading = _Reading(opening)
        self.origin |= _origin(opening)
        for text in opening.remarks:
            self._frames.remark(text)
        out = self._frames.begin(opening)
        early, self._early, self._early_numbers = self._early, [], 0
        for k, (arrived_s, line) in enumerate(early):
            if k < opening.layout.first_line:
                self._frames.note(line)
            else:
                out += self._take([line], arrived_s)
        return out

    def _forget(self) -> list[Piece]:
        count = sum(len(line) for _, line in self._early)
        self._early, self._early_numbers = [], 0
        return [Discarded(count, "lines without numbers")]

    def _dated(self, lines: list[str], fewest: int = 1) -> list[str]:
        if fewest == 1 and not self._is_dated:
            return lines
        text = "\n".join(lines).encode()
        dated = stamps_to_seconds(text, fewest)
        self._is_dated = self._is_dated or dated != text
        return dated.decode().split("\n")

    # Every line after them.

    def _read(self, lines: list[str], now_s: float) -> list[Piece]:
        assert self._reading is not None  # noqa: S101  # else the lines are early
        values, faults = self._reading.read(self._dated(lines))
        out: list[Piece] = []
        done = 0
        for fault in faults:
            out += self._place(values[done : fault.row], now_s)
            done = fault.row + (fault.kind == "damaged")
            out += self._fault(fault, now_s)
            if self._reading is None:  # it prints in another way from here on
                left = lines[fault.line + 1 :]
                return out + (self._take(left, now_s) if left else [])
        return out + self._place(values[done:], now_s)

    def _fault(self, fault: Fault, now_s: float) -> list[Piece]:
        if fault.kind == "text" or not any(map(str.isdigit, fault.text)):
            self._frames.note(fault.text)
            return []
        self.damaged += 1
        out: list[Piece] = [Discarded(len(fault.text), "damaged lines")]
        self._unlike = [*self._unlike, (now_s, fault.text)] if _has_numbers(fault.text) else []
        if len(self._unlike) >= _UNLIKE_MAX:
            return out + self._reopen()
        assert self._reading is not None  # noqa: S101  # else there was no fault
        if self._reading.stamps is None:  # else the stamps tell what is missing
            out += self._put(np.full((1, self._reading.channels), LOST), np.array([now_s]), now_s)
        return out

    def _reopen(self) -> list[Piece]:
        """Begin anew with lines that are all unlike those before."""
        out = [*self._flushed(), *self._frames.frames()]
        self._frames.remark("the board prints in another way from here on")
        self._frames.renew()
        self._reading = None
        self._early, self._unlike = self._unlike, []
        self._early_numbers = len(self._early)
        return out

    def _place(self, values: NDArray[np.float64], now_s: float) -> list[Piece]:
        if not len(values):
            return []
        assert self._reading is not None  # noqa: S101  # the values were read with it
        self.lines += len(values)
        self._unlike = []
        reading = self._reading
        if reading.stamps is None:
            stamps = np.full(len(values), now_s)
        else:
            stamps = reading.stamps.read(values, now_s)
        usable = np.isfinite(stamps)
        rows = values[:, reading.opening.positions]
        return self._put(rows[usable], stamps[usable], now_s)

    def _put(
        self, rows: NDArray[np.float64], stamps: NDArray[np.float64], now_s: float
    ) -> list[Piece]:
        assert self._reading is not None  # noqa: S101  # the rows were read with it
        runs = self._reading.placer.put(rows, stamps, np.full(len(rows), now_s))
        return [piece for run in runs for piece in self._frames.put(run)]


class _Reading:
    """What reads the lines once their layout is known."""

    def __init__(self, opening: TextOpening) -> None:
        self.opening = opening
        self.channels = len(opening.positions)
        self.placer = opening.placer()
        self.stamps = None if opening.stamps is None else StampReader(opening.stamps)

    def read(self, lines: Sequence[str]) -> tuple[NDArray[np.float64], list[Fault]]:
        reader = LineReader(self.opening.layout)
        return np.concatenate(reader.read("\n".join(lines))), reader.faults


def _origin(opening: TextOpening) -> dict[str, str]:
    columns = " ".join(str(position + 1) for position in opening.positions)
    origin = {"clock": opening.clock, "columns": columns}
    if opening.clock == "host":
        origin["rate"] = "by the host's clock"
    if opening.stamps is not None:
        origin["time"] = opening.stamps.remark
        origin["resolution"] = f"{opening.stamps.resolution_s:.9g}"
    return origin


def _has_numbers(line: str) -> bool:
    """Tell whether a line is mostly numbers."""
    words = [word for word in _WORDS.split(line.strip()) if word]
    return bool(words) and 2 * sum(maybe_number(word) is not None for word in words) > len(words)
