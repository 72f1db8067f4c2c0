"""The lock-in results of a recording as a recording of their own: one sample a result."""

import os
import struct
from collections import Counter
from collections.abc import Sequence
from math import pi
from typing import Any

import numpy as np
from numpy.typing import NDArray

from firmware_bridge.arguments import step_frequency_hz
from firmware_bridge.channel import Channel
from firmware_bridge.gap import Gap
from firmware_bridge.gap_reason import counted
from firmware_bridge.host_note import End, Join, Pieces, Stamp, parse_host_note
from firmware_bridge.mask_runs import mask_runs
from firmware_bridge.message import LockIn, parse_message
from firmware_bridge.message_head import MessageError, MessageType
from firmware_bridge.record_file import RecordFile
from firmware_bridge.recording import NO_END
from firmware_bridge.recording_header import RecordingError
from firmware_bridge.span import Span
from firmware_bridge.trace import Recording

__all__ = ["LockInRecording"]

_ROW = struct.Struct("<qQIBBIqq")
_ROWS = np.dtype(
    [
        ("origin", "<i8"),  # index of the recording's first sample in the board's counting
        ("index", "<u8"),
        ("length", "<u4"),
        ("channel", "u1"),
        ("shift", "u1"),
        ("step", "<u4"),
        ("cosine", "<i8"),
        ("sine", "<i8"),
    ]
)
_LINES_MAX = 64
_LENGTH_MAX = 1 << 24
_INDEX_MAX = 1 << 53


class LockInRecording(Recording):
    """Amplitude and phase of each line, one value a result, on the regular grid of the results.

    A line is A·cos(2πft + φ) with t = 0 at the recording's first sample, zero to peak, in the unit of
    its channel; φ goes on over full turns. A result that is missing, or that lacks the line, is NaN.

    Parameters
    ----------
    path : path-like
        An .mfr file.

    Raises
    ------
    RecordingError
        If it cannot be read or holds no lock-in result.
    """

    def __init__(self, path: str | os.PathLike[str]) -> None:
        self.file = RecordFile(path)
        self._packed = bytearray()
        self._joins: dict[int, int] = {}
        self.has_end = False
        """True if the file says that the recording ended as asked."""
        self.damaged = 0
        """Records whose CRC or content does not fit."""
        self._is_of_samples = False
        self._first_stamp: Stamp | None = None
        self._scan()
        rows = np.frombuffer(bytes(self._packed), _ROWS)
        self._packed.clear()
        if not rows.size:
            raise RecordingError(f"{path} holds no sample and no lock-in result")
        length = Counter(rows["length"].tolist()).most_common(1)[0][0]
        self._odd = int(np.count_nonzero(rows["length"] != length))
        rows = rows[rows["length"] == length]
        at = (rows["index"].astype(np.int64) - rows["origin"]) // max(1, length)
        self._first = int(at.min())
        count = int(at.max()) - self._first + 1
        if count > _LENGTH_MAX:
            raise RecordingError(
                f"{path}: lock-in results span {count} places, more than can be true"
            )
        announced = self.file.header.announcement
        channels, self._values = self._columns(rows, at - self._first, count)
        missing = np.asarray(np.isnan(self._values).all(axis=1))
        super().__init__(
            path=str(path),
            format="mfr lock-in",
            rate_hz=announced.rate_hz / max(1, length),
            channels=channels,
            length=count,
            gaps=[Gap(start, stop - start) for start, stop in mask_runs(missing)],
            remarks=self._say(length / announced.rate_hz),
            reasons=[] if self.has_end else [NO_END],
            start_unix_s=self._started(),
        )

    def _scan(self) -> None:
        pieces = Pieces()
        for chunk in self.file.chunks():
            self.damaged += chunk.damaged
            self._is_of_samples |= bool(chunk.samples.size)
            for _, message in chunk.messages:
                whole: bytes | None = message
                try:
                    if message[0] == MessageType.PIECE:
                        whole = pieces.put(message)
                    if whole is not None:
                        self._take(whole)
                except MessageError:
                    self.damaged += 1

    def _take(self, message: bytes) -> None:
        if message[0] == MessageType.LOCK_IN:
            result = parse_message(message)
            assert isinstance(result, LockIn)  # noqa: S101  # the type byte says so
            if len(result.lines) > _LINES_MAX or result.shift > 62:
                raise MessageError("a lock-in result that cannot be true")
            origin = self._joins.setdefault(result.stream, result.index)
            if not (-_INDEX_MAX < origin < _INDEX_MAX and result.index < _INDEX_MAX):
                raise MessageError("a lock-in result that cannot be true")
            for line in result.lines:
                head = (origin, result.index, result.length, result.channel, result.shift)
                self._packed += _ROW.pack(*head, *line)
        elif message[0] > MessageType.PIECE:
            note = parse_host_note(message)
            if isinstance(note, Join):
                self._joins[note.stream] = note.index - note.grid
            elif isinstance(note, Stamp):
                self._first_stamp = self._first_stamp or note
            self.has_end |= isinstance(note, End)

    def _columns(
        self, rows: NDArray[Any], at: NDArray[np.int64], count: int
    ) -> tuple[list[Channel], NDArray[np.float64]]:
        """Return amplitude and phase of each line of each channel, one column each."""
        announced = self.file.header.announcement
        keys = sorted({(int(r["channel"]), int(r["step"])) for r in rows[["channel", "step"]]})
        channels: list[Channel] = []
        values = np.full((count, 2 * len(keys)), np.nan)
        for k, (number, step) in enumerate(keys):
            if number >= len(announced.channels):
                continue
            info = announced.channels[number]
            mine = (rows["channel"] == number) & (rows["step"] == step)
            phasor = info.scale * _phasors(rows[mine], step)
            values[at[mine], 2 * k] = np.abs(phasor)
            values[at[mine], 2 * k + 1] = np.unwrap(np.angle(phasor))
            frequency_hz = step_frequency_hz(step, announced.rate_hz)
            name = f"{info.name} {frequency_hz:.7g} Hz"
            channels += [Channel(f"{name} amplitude", info.unit), Channel(f"{name} phase", "rad")]
        if not channels:
            raise RecordingError(
                f"{self.file.path}: lock-in results of channels that there are not"
            )
        return channels, values[:, : len(channels)]

    def _say(self, length_s: float) -> list[str]:
        text = f"lock-in results of the board, each over {length_s:.6g} s"
        said = [
            (True, text + ("" if self._is_of_samples else "; it sent no samples")),
            (self._odd, f"{counted(self._odd, 'line result')} of another length left out"),
            (self.damaged, f"{counted(self.damaged, 'damaged record')} left out"),
            (len(self._joins) > 1, "the board was restarted or reconnected: phases begin anew"),
            (not self.has_end, NO_END),
            (self.file.header.announcement.simulated, "recorded from a simulated board"),
        ]
        return [text for is_so, text in said if is_so]

    def _started(self) -> float | None:
        stamp, announced = self._first_stamp, self.file.header.announcement
        if stamp is None or stamp.stream not in self._joins:
            return None
        before = stamp.index - self._joins[stamp.stream]
        return stamp.unix_ns / 1e9 - before / (announced.rate_hz * announced.speed)

    def read(self, channels: Sequence[int], start: int, stop: int) -> Span:
        """Return results ``start`` to ``stop`` (not included); see `Recording`.

        Parameters
        ----------
        channels : sequence of int
            Positions in ``self.channels``.
        start, stop : int
            Numbers of results.

        Returns
        -------
        Span
            Values.
        """
        return Span(np.ascontiguousarray(self._values[start:stop][:, list(channels)]))


def _phasors(rows: NDArray[Any], step: int) -> NDArray[np.complex128]:
    """Return 2 S / (length · 2^shift), its phase counted from the recording's first sample."""
    sums = rows["cosine"].astype(np.float64) - 1j * rows["sine"].astype(np.float64)
    size = np.maximum(rows["length"].astype(np.float64), 1.0) * 2.0 ** rows["shift"]
    # The carriers count from the board's index 0: a whole number of steps, so the turn is exact.
    turns = np.array([step * int(origin) % 2**32 for origin in np.unique(rows["origin"])])
    turn = turns[np.unique(rows["origin"], return_inverse=True)[1]]
    return np.asarray(2 * sums / size * np.exp(2j * pi * turn / 2**32))
