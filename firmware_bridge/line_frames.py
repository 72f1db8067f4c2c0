"""Placed lines to frames: counts, over-range marks, board clock, streams, and notes beside them."""

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from firmware_bridge.announcement import Announcement, pack_announcement
from firmware_bridge.envelope import Discarded, seal, seal_rows
from firmware_bridge.frame import OVER_RANGE, pack_frames
from firmware_bridge.host_note import Remark
from firmware_bridge.message_head import MessageType, pack
from firmware_bridge.placed_lines import PlacedLines
from firmware_bridge.text_opening import TextOpening

__all__ = ["FRAME_S", "LOST", "LineFrames", "Pause", "Piece"]

FRAME_S = 0.25
"""Length of a full frame [s]."""

LOST = -np.inf
"""What stands in every column for a line that was damaged: one missing sample."""

_INT32_MAX = 2**31 - 1
_TICKS_MAX = 2.0**62
_NOTES_MAX = 200
_NOTE_BYTES = 500


@dataclass(frozen=True, slots=True)
class Pause:
    """Samples missing before a stream that goes on with the recording, as a clock tells.

    Parameters
    ----------
    stream : int
        The stream that begins after it.
    length : int
        Samples.
    length_u : float
        Standard uncertainty of ``length``.
    """

    stream: int
    length: int
    length_u: float


Piece = bytes | Discarded | Pause | Remark


class LineFrames:
    """Pack lines into frames.

    Parameters
    ----------
    stream : int
        Stream id to begin with; each pause of uncertain length takes the next one.
    """

    def __init__(self, stream: int) -> None:
        self._stream = stream
        self._opening: TextOpening | None = None
        self._slots = 1
        self._index = self._sequence = 0
        self._counts: list[NDArray[np.int32]] = []
        self._over: list[NDArray[np.bool_]] = []
        self._ticks: list[NDArray[np.uint64]] = []
        self._notes: list[Piece] = []
        self.texts = 0
        """Notes taken, those too many to be kept included."""
        self.begun_s = 0.0
        """Arrival of the first line that waits."""

    @property
    def is_waiting(self) -> bool:
        """Whether lines or notes wait to be framed."""
        return bool(self._counts or self._notes)

    def begin(self, opening: TextOpening) -> list[Piece]:
        """Return the announcement of lines to be read as ``opening`` says.

        Parameters
        ----------
        opening : TextOpening
            How they are read.

        Returns
        -------
        list of bytes
            One.
        """
        self._opening = opening
        self._slots = min(512, max(1, round(opening.rate_hz * FRAME_S)))
        announcement = Announcement(
            stream=self._stream,
            rate_hz=opening.rate_hz,
            format="int32",
            slots=self._slots,
            channels=opening.channels,
            board="lines of text",
            clock_hz=opening.clock_hz,
        )
        return [seal(pack_announcement(announcement))]

    def renew(self) -> None:
        """Go on under another stream id."""
        self._stream = (self._stream + 1) % 2**32
        self._index = self._sequence = 0

    def put(self, lines: PlacedLines) -> list[Piece]:
        """Take placed lines; return what is complete.

        Parameters
        ----------
        lines : PlacedLines
            The channels' columns.

        Returns
        -------
        list of bytes or Pause
            Frames, and pauses before them.
        """
        out: list[Piece] = []
        if lines.missing_u or lines.is_restart:
            out += self._paused(lines)
        elif lines.missing:
            out += self.frames()
            self._index += lines.missing
        is_lost = (lines.rows == LOST).all(axis=1)
        for part in np.split(np.arange(is_lost.size), np.flatnonzero(is_lost)):
            if part.size and is_lost[part[0]]:
                out += self.frames()
                self._index += 1
                part = part[1:]
            if part.size:
                self._append(lines, part)
            if sum(map(len, self._counts)) >= self._slots:
                out += self.frames()
        return out

    def _paused(self, lines: PlacedLines) -> list[Piece]:
        assert self._opening is not None  # noqa: S101  # lines come after it
        out = self.frames()
        self.renew()
        if lines.is_restart:
            out.append(Remark("the board's clock began anew: the gap is by the host's clock"))
        out.append(Pause(self._stream, lines.missing, lines.missing_u))
        return out + self.begin(self._opening)

    def _append(self, lines: PlacedLines, part: NDArray[np.int64]) -> None:
        assert self._opening is not None  # noqa: S101  # lines come after it
        if not self._counts:
            self.begun_s = float(lines.arrivals_s[part[0]])
        with np.errstate(over="ignore"):  # what becomes infinite is over-range
            scaled = lines.rows[part] * self._opening.factors
        over = ~(np.abs(scaled) <= _INT32_MAX)
        counts = np.where(np.isnan(scaled), LOST, np.rint(scaled))
        self._counts.append(np.clip(counts, -_INT32_MAX - 1, _INT32_MAX).astype(np.int32))
        self._over.append(np.asarray(over.any(axis=1)))
        is_board = self._opening.clock == "stamps"
        clock_s = (lines.stamps_s if is_board else lines.arrivals_s)[part]
        # A stray stamp may be any number.
        latest_s = _TICKS_MAX / self._opening.clock_hz
        ticks = np.rint(np.clip(clock_s, 0.0, latest_s) * self._opening.clock_hz)
        self._ticks.append(ticks.astype(np.uint64))

    def frames(self) -> list[Piece]:
        """Return what waits as frames, the last one filled in part, and the notes beside it.

        Returns
        -------
        list of bytes
            Sealed messages.
        """
        out: list[Piece] = []
        if self._counts:
            counts, over = np.concatenate(self._counts), np.concatenate(self._over)
            starts = np.arange(0, len(counts), self._slots)
            rows = pack_frames(
                counts,
                slots=self._slots,
                first_index=self._index,
                first_sequence=self._sequence,
                stream=self._stream,
                clock=np.concatenate(self._ticks)[starts],
                flags=np.logical_or.reduceat(over, starts) * OVER_RANGE,
            )
            self._index += len(counts)
            self._sequence += len(rows)
            self._counts, self._over, self._ticks = [], [], []
            out += [row.tobytes() for row in seal_rows(rows)]
        notes, self._notes = self._notes, []
        return out + notes

    def note(self, text: str) -> None:
        """Keep a line of text as a note; after many, only count them.

        Parameters
        ----------
        text : str
            The line.
        """
        self.texts += 1
        if self.texts <= _NOTES_MAX:
            body = text.strip().encode()[:_NOTE_BYTES].decode(errors="ignore").encode()
            self._notes.append(seal(pack(MessageType.NOTE, body)))

    def remark(self, text: str) -> None:
        """Keep a remark of the host until the next frames.

        Parameters
        ----------
        text : str
            For people.
        """
        self._notes.append(Remark(text))

    def closing(self) -> list[Piece]:
        """Return everything that waits: nothing more will come.

        Returns
        -------
        list of bytes or Remark
            As from `frames`.
        """
        if self.texts > _NOTES_MAX:
            self.remark(f"{self.texts} lines of text came; the first {_NOTES_MAX} are kept")
        return self.frames()
