"""Record a port into a file, without losing a sample unnoticed."""

import os
import secrets
import threading
from collections.abc import Callable
from dataclasses import dataclass, field
from pathlib import Path

from firmware_bridge.drive_desk import DriveDesk
from firmware_bridge.drive_lines import DriveLines
from firmware_bridge.errors import BridgeError, DeviceFailedError
from firmware_bridge.gap import Gap
from firmware_bridge.gap_reason import counted, gap_reason
from firmware_bridge.intake import Intake
from firmware_bridge.live_events import LiveBlock
from firmware_bridge.lock_in_start import LockInStart
from firmware_bridge.port import ByteSource, open_port
from firmware_bridge.recording import open_mfr
from firmware_bridge.recording_progress import Progress
from firmware_bridge.recording_session import RecordingSession
from firmware_bridge.rotation import Rotation
from firmware_bridge.text_frames import TextFramer
from firmware_bridge.writer import DiskError

__all__ = ["Progress", "RecordSummary", "record"]

_MOST_NAMED = 4


@dataclass(frozen=True, slots=True)
class RecordSummary:
    """What was recorded, read back from the file.

    Parameters
    ----------
    file : Path or None
        The (first) recording, None if nothing came.
    samples : int
        Samples on the grid, gaps included, all files together.
    gaps : list of Gap
        On the grid of their file; with rotation those of the last file.
    over_range : int
        Over-range values, all channels; with rotation those of the last file.
    bytes_discarded : int
        Bytes that arrived and were not kept.
    duration_s : float
        Length of the grid [s].
    files : list of Path
        All files; more than one where the board changed its channels or rate.
    rate_hz, rate_u_hz : float or None
        Rate of the last file, and its standard uncertainty where a clock tells it.
    remarks : list of str
        What is odd about the recordings.
    lock_ins : int
        Lock-in results received.
    discarded_midway : int
        Of the bytes discarded those between frames that were kept: not the first message, which is
        seldom received from its beginning, and not frames received twice.
    """

    file: Path | None
    samples: int
    gaps: list[Gap]
    over_range: int
    bytes_discarded: int
    duration_s: float
    files: list[Path] = field(default_factory=list)
    rate_hz: float | None = None
    rate_u_hz: float | None = None
    remarks: list[str] = field(default_factory=list)
    discarded_midway: int = 0
    lock_ins: int = 0

    @property
    def reasons(self) -> list[str]:
        """Why the recording must not be trusted as it is; empty where nothing was lost."""
        found = [gap_reason(self.gaps, self.samples)] if self.gaps else []
        if self.discarded_midway:
            found.append(f"{counted(self.discarded_midway, 'byte')} discarded midway")
        return found


def record(
    port: str | ByteSource,
    path: str | os.PathLike[str],
    *,
    duration_s: float | None = None,
    baud: int = 115200,
    text: bool = False,
    rate_hz: float | None = None,
    size_bytes: int | None = None,
    reconnect: bool = False,
    overwrite: bool = False,
    progress: Callable[[Progress], None] | None = None,
    stop: threading.Event | None = None,
    lock_in: LockInStart | None = None,
    drive: DriveLines | None = None,
    on_block: Callable[[LiveBlock], None] | None = None,
    rotate_bytes: int | None = None,
    rotate_s: float | None = None,
    next_path: Callable[[int], str | os.PathLike[str]] | None = None,
    on_ended: Callable[[Path], None] | None = None,
) -> RecordSummary:
    """Record what a board sends until the duration or size is reached, Ctrl-C, or ``stop``.

    Parameters
    ----------
    port : str or ByteSource
        A port name or pyserial URL; an open port for boards that are reached otherwise.
    path : path-like
        The recording to make.
    duration_s : float, optional
        Seconds of the board's own counting, > 0: exactly round(duration · rate) samples.
    baud : int
        Symbols per second.
    text : bool
        The board prints lines of numbers.
    rate_hz : float, optional
        With ``text``, the lines per second; without it the host's clock tells.
    size_bytes : int, optional
        End before the files, all together, become larger than this.
    reconnect : bool
        Wait for a port that is gone and go on in the same recording.
    overwrite : bool
        Replace an existing recording.
    progress : callable, optional
        Called a few times a second with a `Progress`.
    stop : threading.Event, optional
        Ends the recording when set.
    lock_in : LockInStart, optional
        Have the board's own lock-in send results, and no samples.
    drive : DriveLines, optional
        Lines that the board drives from before the first sample kept until the end; then they come
        to rest.
    on_block : callable, optional
        Takes a `LiveBlock` for each frame kept; it runs beside the reading and may be slow for as
        long as the queue holds (10 s of a fast link). What it raises ends the recording.
    rotate_bytes, rotate_s : optional
        Go on in a next file, without a lost sample, before one is larger or longer than this.
    next_path : callable, optional
        Returns the path of file number n (2, 3, …); by default NAME-n.
    on_ended : callable, optional
        Takes the path of each file that is complete while the recording goes on.

    Returns
    -------
    RecordSummary
        What the file holds.

    Raises
    ------
    BridgeError
        If the port cannot be opened or the file not be made; nothing is written then.
    DeviceFailedError
        If the port or the file fails midway; the message says what was kept.
    """
    if duration_s is not None and not 0 < duration_s < float("inf"):
        raise BridgeError(f"duration_s must be > 0 s and finite, got {duration_s!r}")
    if not overwrite and _exists(Path(path)):
        raise BridgeError(f"{path} exists; --overwrite replaces it")
    if text and lock_in is not None:
        raise BridgeError("a lock-in needs a board that sends frames, not text")
    if text and drive is not None and drive.lines:
        raise BridgeError("drive lines need a board that sends frames, not text")
    rotation = Rotation(rotate_bytes, rotate_s, next_path, on_ended)
    source = open_port(port, baud) if isinstance(port, str) else port
    framer = TextFramer(secrets.randbits(32), rate_hz) if text else None
    # A framer of text completes it once the first lines have told what it reads.
    info = {"source": "frames"} if framer is None else framer.origin
    info["port"] = source.name
    desk = None
    if drive is not None and drive.lines:
        info["lines"] = drive.description()
        desk = DriveDesk(drive, is_held=True)
    intake = Intake(
        path,
        info=info,
        duration_s=duration_s,
        size_bytes=size_bytes,
        overwrite=overwrite,
        rotation=rotation,
        on_block=on_block,
    )
    stop = stop or threading.Event()
    is_rotated = rotate_bytes is not None or rotate_s is not None
    try:
        session = RecordingSession(
            source, baud, intake, framer, reconnect, stop, desk, lock_in=lock_in
        )
        session.run(progress)
    except DiskError as error:
        failure = DeviceFailedError(f"{error}; {_kept_on_disk(intake.files)}")
        failure.kept = _maybe_summary(intake, is_rotated=is_rotated)
        raise failure from error
    except DeviceFailedError as error:
        error.kept = _maybe_summary(intake, is_rotated=is_rotated)
        raise
    return _summary(intake, is_rotated=is_rotated)


def _exists(path: Path) -> bool:
    try:
        return path.exists()
    except OSError:  # a folder that may not be read: making the file will say so
        return False


def _maybe_summary(intake: Intake, *, is_rotated: bool) -> RecordSummary | None:
    """Return what was kept, None where the files cannot be read."""
    try:
        return _summary(intake, is_rotated=is_rotated)
    except BridgeError:
        return None


def _kept_on_disk(files: list[Path]) -> str:
    there = [path for path in files if path.exists()]  # of a rotation some may be deleted by now
    try:
        recordings = [open_mfr(path) for path in there]
    except BridgeError:
        return "nothing was recorded"
    if not recordings:
        return "nothing was recorded"
    samples = sum(recording.length for recording in recordings)
    time_s = sum(recording.duration_s for recording in recordings)
    return f"kept {samples} samples ({time_s:.4g} s) in {_named(there)}"


def _named(files: list[Path]) -> str:
    """Return the names of files, of many the first and the last."""
    if len(files) <= _MOST_NAMED:
        return ", ".join(map(str, files))
    return f"{len(files)} files from {files[0]} to {files[-1]}"


def _summary(intake: Intake, *, is_rotated: bool) -> RecordSummary:
    files = intake.files
    if not intake.samples:
        return _summary_of_no_samples(intake)
    # Files of a rotation may be many, and gone by now.
    recordings = [open_mfr(path) for path in (files[-1:] if is_rotated else files)]
    samples = sum(recording.length for recording in recordings)
    duration_s = sum(recording.duration_s for recording in recordings)
    if is_rotated:
        samples, duration_s = samples + intake.earlier, duration_s + intake.earlier_s
    return RecordSummary(
        files[0],
        samples,
        [gap for recording in recordings for gap in recording.gaps],
        sum(recording.over_range for recording in recordings),
        intake.bytes_discarded,
        duration_s,
        files,
        recordings[-1].rate_hz,
        recordings[-1].rate_u_hz,
        list(dict.fromkeys(remark for recording in recordings for remark in recording.remarks)),
        intake.discarded_midway,
        intake.lock_ins,
    )


def _summary_of_no_samples(intake: Intake) -> RecordSummary:
    rate_hz = intake.rate_hz
    return RecordSummary(
        intake.files[0] if intake.files else None,
        0,
        [],
        0,
        intake.bytes_discarded,
        intake.reached / rate_hz if rate_hz else 0.0,
        intake.files,
        rate_hz,
        discarded_midway=intake.discarded_midway,
        lock_ins=intake.lock_ins,
    )
