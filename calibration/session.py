"""The recordings of one session by role, opened and read channel by channel."""

from collections.abc import Iterator, Mapping, Sequence
from dataclasses import dataclass, field, replace
from functools import cached_property
from os import PathLike
from os.path import relpath
from pathlib import Path

import numpy as np

from calibration.errors import CalibrationError
from calibration.file_hash import sha256_of
from firmware_bridge.opening import open_recording
from firmware_bridge.trace import Recording, Trace
from metro.bench import Bench
from metro.kernel.photodiode import step_v
from metro.measured import Measured

__all__ = ["ROLES", "RoleRecord", "Session", "has_extremes", "photodiode_name"]

ROLES = (
    "dark",
    "pickup",
    "blocked-x",
    "blocked-y",
    "scan",
    "lines-rising",
    "lines-falling",
    "lines-free",
    "series",
)


@dataclass(frozen=True, eq=False)
class RoleRecord:
    """One recording in its role: photodiode trace, drive trace if there is one, and its origin.

    ``step_v`` is what one count of the photodiode's channel is worth [V], as the board announced it;
    None where the file holds no counts of its own.
    """

    role: str
    path: str
    photodiode: Trace
    drive: Trace | None
    length: int
    remarks: tuple[str, ...] = field(default=())
    step_v: float | None = None

    @property
    def used_fraction(self) -> float:
        """Part of the samples that is neither missing nor over-range."""
        return float(np.count_nonzero(np.isfinite(self.photodiode.values))) / self.length

    @cached_property
    def sha256(self) -> str:
        """The SHA-256 of the file."""
        return sha256_of(self.path)

    def path_from(self, folder: str | PathLike[str]) -> str | None:
        """Return the file's path from a folder, with slashes; None from another drive."""
        try:
            return Path(relpath(self.path, folder)).as_posix()
        except ValueError:  # Windows, another drive
            return None

    def to_dict(self, folder: str | PathLike[str] | None = None) -> dict[str, object]:
        """Return what a calibration keeps of its recording: role, file, SHA-256, counts, step.

        The path from the calibration's own folder too, where that is known.
        """
        path = None if folder is None else self.path_from(folder)
        step = None if self.step_v is None else Measured.of(self.step_v, "V").to_dict()
        return {
            "role": self.role,
            "file": Path(self.path).name,
            "sha256": self.sha256,
            "samples": self.length,
            "rate": Measured.of(self.photodiode.rate_hz, "Hz").to_dict(),
            "remarks": list(self.remarks),
            "missing": self.photodiode.missing,
            "over_range": self.photodiode.over_range,
            "step": step,
            **({} if path is None else {"path": path}),
        }


class Session:
    """All recordings of a session.

    Parameters
    ----------
    files : mapping of str to sequence of path
        Paths by role (see ``ROLES``).
    bench : Bench
        Names the drive's channel (``drive.channel``).

    Raises
    ------
    CalibrationError
        If a role is unknown, one file stands in two places, no lines recording is given, some of
        them have a drive channel and some not, or a channel is not in volts.
    """

    def __init__(self, files: Mapping[str, Sequence[str | PathLike[str]]], bench: Bench) -> None:
        unknown = [role for role in files if role not in ROLES]
        if unknown:
            raise CalibrationError(f"role must be one of {', '.join(ROLES)}, got {unknown[0]!r}")
        self._records = [
            _open(role, str(path), bench) for role in ROLES for path in files.get(role, ())
        ]
        _check_distinct(self._records)
        if not self.driven:
            raise CalibrationError(
                "a calibration needs at least one recording of lines on a slope, got none "
                "(--lines-rising FILE or --lines-falling FILE, or --lines-free FILE where the bench "
                "runs freely)"
            )

        read = {record.drive is not None for record in self.driven}
        if len(read) > 1:
            bare = next(record.path for record in self.driven if record.drive is None)
            raise CalibrationError(
                f"all lines recordings must have a drive channel or none, got one without: {bare}"
            )

    @property
    def slopes(self) -> list[RoleRecord]:
        """The lines recordings on both slopes."""
        return [*self.of("lines-rising"), *self.of("lines-falling")]

    @property
    def driven(self) -> list[RoleRecord]:
        """All lines recordings: on both slopes, then free-running."""
        return [*self.slopes, *self.of("lines-free")]

    def of(self, role: str) -> list[RoleRecord]:
        """Return the records of one role, in the order given."""
        return [record for record in self._records if record.role == role]

    def __iter__(self) -> Iterator[RoleRecord]:
        return iter(self._records)


def _check_distinct(records: Sequence[RoleRecord]) -> None:
    """Refuse one recording in two places: it would be compared with itself, or count twice.

    A drive series may hold the lines recordings, which it does not count again.
    """
    seen: dict[tuple[str, bool], RoleRecord] = {}
    for record in records:
        first = seen.setdefault((record.sha256, record.role == "series"), record)
        if first is not record:
            raise CalibrationError(
                "each recording must stand in one role, once, got the same samples as "
                f"--{first.role} {first.path} and as --{record.role} {record.path}"
            )


def _open(role: str, path: str, bench: Bench) -> RoleRecord:
    if path == "-":
        raise CalibrationError(
            "a calibration keeps its recordings' hashes and needs files, got '-'"
        )
    recording = open_recording(path)
    drive = _drive(recording, bench)
    name = photodiode_name(recording)
    return RoleRecord(
        role=role,
        path=path,
        photodiode=_in_volts(recording.trace(name), bench, path),
        drive=None if drive is None else _in_volts(drive, bench, path),
        length=recording.length,
        remarks=tuple(recording.remarks),
        step_v=_step_v(recording, recording.find(name)),
    )


def _step_v(recording: Recording, position: int) -> float | None:
    channel = recording.channels[position]
    return channel.scale if recording.format == "mfr" and channel.unit == "V" else None


def _in_volts(trace: Trace, bench: Bench, path: str) -> Trace:
    """Return a channel in volts; counts are converted where the bench describes the converter."""
    if trace.unit == "V":
        return trace
    if trace.unit != "1":
        raise CalibrationError(f"{path}: {trace.name!r} must be in V, got {trace.unit}")
    if bench.get("adc.bits") is None or bench.get("adc.range") is None:
        raise CalibrationError(
            f"{path}: {trace.name!r} has no unit; as ADC counts it needs adc.bits and adc.range "
            "in the bench"
        )
    step = step_v(bench.magnitude("adc.range"), bench.magnitude("adc.bits"))
    volts = trace.values * step + bench.magnitude("adc.offset", 0.0)
    return replace(trace, values=volts, unit="V")


def has_extremes(bench: Bench) -> bool:
    """Return whether a bench file gives both extremes of the fringe."""
    return bench.get("fringe.low") is not None and bench.get("fringe.high") is not None


def photodiode_name(recording: Recording) -> str:
    """Return the photodiode's channel of a session's recording: by name, else the first one."""
    names = [channel.name for channel in recording.channels]
    return f"name:{'photodiode' if 'photodiode' in names else names[0]}"


def _drive(recording: Recording, bench: Bench) -> Trace | None:
    wanted = bench.text("drive.channel")
    names = [channel.name for channel in recording.channels]
    if wanted is not None:
        return recording.trace(wanted)
    return recording.trace("name:drive") if "drive" in names else None
