"""From messages to files: what a recording does with each message, without ports or threads."""

import os
from collections.abc import Callable
from pathlib import Path

from firmware_bridge.announced_streams import AnnouncedStreams
from firmware_bridge.announcement import Announcement, parse_announcement
from firmware_bridge.counted_samples import CountedSamples
from firmware_bridge.decoder import Decoder
from firmware_bridge.envelope import Discarded
from firmware_bridge.frame_intake import FrameIntake
from firmware_bridge.host_note import Remark
from firmware_bridge.line_frames import Pause
from firmware_bridge.live_events import LiveBlock
from firmware_bridge.lock_in_intake import LockInIntake
from firmware_bridge.message import LockIn, parse_message
from firmware_bridge.message_head import WIRE_VERSION, MessageError, MessageType
from firmware_bridge.recording_files import RecordingFiles
from firmware_bridge.recording_grid import RecordingGrid
from firmware_bridge.rotation import Rotation
from firmware_bridge.running_recording import RunningRecording
from firmware_bridge.samples_frame import Samples, parse_samples

__all__ = ["Intake"]

_INDEX_MAX = 1 << 62  # 36 000 years at 4 MHz


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
        files = RecordingFiles(path, info or {}, size_bytes, overwrite, rotation or Rotation())
        self._recording = RunningRecording(files, RecordingGrid(duration_s))
        self._decoder = Decoder()
        self._streams = AnnouncedStreams(self._decoder, self._recording)
        self._counted = CountedSamples(self._decoder, self._recording, on_block)
        shared = (self._decoder, self._streams, self._counted, self._recording)
        self._frames, self._results = FrameIntake(*shared), LockInIntake(*shared)

    @property
    def files(self) -> list[Path]:
        """The files written, in order."""
        return self._recording.files.paths

    @property
    def samples(self) -> int:
        """Samples received, all files together."""
        return self._counted.samples

    @property
    def gaps(self) -> int:
        """Gaps so far."""
        return self._counted.gaps

    @property
    def flagged(self) -> int:
        """Frames flagged as over-range."""
        return self._counted.flagged

    @property
    def lock_ins(self) -> int:
        """Lock-in results received."""
        return self._results.count

    @property
    def every_s(self) -> float:
        """From one lock-in result to the next [s], where the board sends nothing else."""
        return self._counted.every_s

    @property
    def bytes_discarded(self) -> int:
        """Bytes that came and were not kept."""
        return self._recording.discards.bytes

    @property
    def discarded_midway(self) -> int:
        """Of these the bytes between two frames that were kept; frames received twice not counted."""
        return self._recording.discards.bytes_midway

    @property
    def bytes_written(self) -> int:
        """Length of all files together, with what still waits to be written."""
        return self._recording.files.length_bytes

    @property
    def earlier(self) -> int:
        """Grid samples in the files before the present one."""
        return self._recording.grid.earlier

    @property
    def earlier_s(self) -> float:
        """Their length by the board's counting [s]."""
        return self._recording.grid.earlier_s

    @property
    def reached(self) -> int:
        """Grid samples so far, all files together."""
        return self._recording.grid.earlier + self._recording.grid.reached

    @property
    def wanted(self) -> int | None:
        """Grid samples the present file shall have, None without duration or announcement."""
        return self._recording.grid.wanted

    @property
    def rate_hz(self) -> float | None:
        """Announced rate, None before the announcement."""
        return self._recording.grid.rate_hz

    @property
    def is_announced(self) -> bool:
        """Whether the board's announcement for what it sends now is known."""
        return self._recording.files.is_open and not self._streams.is_awaited

    @property
    def announcement(self) -> Announcement | None:
        """What the board said last about itself, None from the port's loss until it speaks again."""
        return self._streams.latest

    @property
    def is_known(self) -> bool:
        """Whether any board has announced itself."""
        return self._streams.are_any

    @property
    def is_complete(self) -> bool:
        """True once the duration or the size is reached."""
        return self._recording.is_complete

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
        self._recording.clock.now_ns = (monotonic_ns, unix_ns)
        if self.is_complete:
            return
        if isinstance(piece, Discarded):
            self._recording.discard(piece)
        elif isinstance(piece, Pause):
            self._recording.pauses[piece.stream] = piece
        elif isinstance(piece, Remark):
            self.remark(piece.text)
        else:
            self._message(piece)

    def tick(self, monotonic_ns: int, unix_ns: int) -> None:
        """Do what is due by time: host stamps, remarks, and having the records on the disk.

        Parameters
        ----------
        monotonic_ns, unix_ns : int
            The host's clocks now.
        """
        self._recording.clock.now_ns = (monotonic_ns, unix_ns)
        self._recording.tick()

    def remark(self, text: str) -> None:
        """Write a remark into the recording, if there is one yet.

        Parameters
        ----------
        text : str
            For people.
        """
        self._recording.remark(text)

    def away(self) -> None:
        """Take note that the port was away: nothing from before will come any more."""
        self._frames.away()
        self._streams.latest = None

    def close(self, *, is_as_asked: bool = True) -> None:
        """Close the recording: the last stamp, what was discarded, everything on the disk.

        Parameters
        ----------
        is_as_asked : bool
            Whether it ends by its duration or size, or because someone ended it; else the port or
            the file failed, and the recording holds no end.
        """
        self._frames.finish()
        self._recording.close(is_as_asked=is_as_asked)

    def _message(self, message: bytes) -> None:
        kind, version = message[0], message[1]
        if version != WIRE_VERSION or kind >= MessageType.PIECE:
            reason = f"message type {kind:#04x}, wire version {version}"
            self._recording.discard_message(message, reason)
        elif kind == MessageType.ANNOUNCEMENT:
            self._announcement(message)
        elif kind in (MessageType.SAMPLES, MessageType.LOCK_IN):
            self._measured(message)
        elif self._recording.files.is_open and kind != MessageType.COMMAND:
            # Commands are our own, come back on a port that loops or echoes.
            self._recording.files.append(message)

    def _announcement(self, message: bytes) -> None:
        try:
            announcement = parse_announcement(message)
        except MessageError as error:
            self._recording.discard_message(message, str(error))
            return
        self._decoder.accept(message)
        for early in self._streams.add(announcement):
            self._measured(early)

    def _measured(self, message: bytes) -> None:
        """Take a samples frame or a lock-in result once its stream is announced."""
        try:
            piece = _parsed(message)
        except MessageError as error:
            self._recording.discard_message(message, str(error))
            return
        if piece.stream not in self._streams:
            self._streams.wait(message)
        elif isinstance(piece, Samples):
            self._frames.take(piece, message)
        else:
            self._results.take(piece, message)


def _parsed(message: bytes) -> Samples | LockIn:
    """Return what is in a samples frame or a lock-in result."""
    piece: Samples | LockIn
    if message[0] == MessageType.SAMPLES:
        piece = parse_samples(message)
        length = len(piece.data)
    else:
        result = parse_message(message)
        assert isinstance(result, LockIn)  # noqa: S101  # the type byte says so
        piece, length = result, result.length
    if piece.index + length > _INDEX_MAX:
        raise MessageError(f"an index beyond any board's ({piece.index})")
    return piece
