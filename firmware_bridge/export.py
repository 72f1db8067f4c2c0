"""Recordings to CSV, NPY, NPZ and HDF5, to be opened by other programs alone.

All hold a column ``time_s`` (seconds from the recording's first sample) and one column a
channel, one row a sample, NaN where a sample is missing or out of range. CSV has one header line,
``photodiode [V]``, and numbers in the fewest digits that give the same float back. NPZ and HDF5
hold beside that, as JSON under ``midfringe``: format version, rate and its uncertainty, units,
gaps, over-range count, remarks, source and time of export; HDF5 also as attributes. NPY holds
records with one field a column and nothing beside. All are written block by block: memory does not
grow with the recording.
"""

import json
import zipfile
from collections.abc import Iterator, Mapping, Sequence
from contextlib import contextmanager
from dataclasses import dataclass
from datetime import UTC, datetime
from pathlib import Path
from typing import Any, BinaryIO

import numpy as np
from numpy.typing import NDArray

from firmware_bridge.column_name import split_header
from firmware_bridge.errors import BridgeError
from firmware_bridge.span import Span
from firmware_bridge.trace import Recording
from metro.extras import require
from metro.output import check_writable, writing_whole

__all__ = ["FORMAT_VERSION", "ExportError", "export_recording"]

FORMAT_VERSION = "1.0"
"""Of the NPZ and HDF5 files; an older major stays readable, a newer one is refused."""

_BLOCK = 65536  # samples
_TIME = "time_s"


class ExportError(BridgeError):
    """A file type that recordings are not exported to."""


@dataclass(frozen=True, eq=False)
class _Stretch:
    """What is exported: some channels from one grid index to another."""

    recording: Recording
    channels: tuple[int, ...]
    start: int
    stop: int
    beside: Mapping[str, Any]

    @property
    def count(self) -> int:
        """Number of samples."""
        return self.stop - self.start

    @property
    def keys(self) -> list[str]:
        """Names of the columns without the time's, each once."""
        keys: list[str] = []
        for position in self.channels:
            name = self.recording.channels[position].name or f"column {position + 1}"
            taken = {_TIME, "midfringe", *keys}
            free = (f"{name} ({k})" for k in range(2, 2 + len(taken)))
            keys.append(name if name not in taken else next(k for k in free if k not in taken))
        return keys

    @property
    def units(self) -> list[str]:
        """Units of the columns."""
        return [self.recording.channels[position].unit for position in self.channels]

    def bounds(self) -> Iterator[tuple[int, int]]:
        """Yield the grid indices of one block after another."""
        for first in range(self.start, self.stop, _BLOCK):
            yield first, min(first + _BLOCK, self.stop)

    def times(self, first: int, last: int) -> NDArray[np.float64]:
        """Return the times of a block, shape (n,) [s]."""
        return np.arange(first, last) / self.recording.rate_hz

    def blocks(self) -> Iterator[tuple[NDArray[np.float64], Span]]:
        """Yield times, shape (n,), and values, shape (n, channels), of one block after another."""
        for first, last in self.bounds():
            yield self.times(first, last), self.recording.read(self.channels, first, last)

    def column(self, position: int) -> Iterator[Span]:
        """Yield one channel, values of shape (n, 1), of one block after another."""
        for first, last in self.bounds():
            yield self.recording.read([position], first, last)

    def metadata(self) -> dict[str, Any]:
        """Return what stands beside the arrays."""
        recording = self.recording
        clipped = [
            (max(gap.index, self.start), min(gap.index + gap.length, self.stop), gap)
            for gap in recording.gaps
        ]
        return {
            "version": FORMAT_VERSION,
            "source": Path(recording.path).name,
            "exported": datetime.now(UTC).isoformat(timespec="seconds"),
            "rate_hz": recording.rate_hz,
            "rate_u_hz": recording.rate_u_hz,
            "first_index": self.start,
            "start_unix_s": recording.start_unix_s,
            "units": {_TIME: "s", **dict(zip(self.keys, self.units, strict=True))},
            "gaps": [(a - self.start, b - a, gap.length_u) for a, b, gap in clipped if a < b],
            "remarks": list(recording.remarks),
            **self.beside,
        }


def export_recording(
    recording: Recording,
    path: str | Path,
    *,
    channels: Sequence[str] | None = None,
    from_s: float | None = None,
    to_s: float | None = None,
    overwrite: bool = False,
    beside: Mapping[str, Any] | None = None,
) -> int:
    """Write a recording as CSV, NPY, NPZ or HDF5.

    Parameters
    ----------
    recording : Recording
        Opened.
    path : str or Path
        The file to be: its suffix ``.csv``, ``.npy``, ``.npz``, ``.h5`` or ``.hdf5`` says the kind.
    channels : sequence of str, optional
        Names or column numbers, by default all.
    from_s, to_s : float, optional
        The stretch [s].
    overwrite : bool
        Whether an existing file may be replaced.
    beside : mapping, optional
        What else goes into the metadata of NPZ and HDF5, in plain JSON types.

    Returns
    -------
    int
        Number of samples written, gaps included.

    Raises
    ------
    ExportError
        If the suffix is none of these.
    OutputError
        If the file exists, is the recording itself, or cannot be written.
    BridgeError
        If there is no such channel or stretch.
    """
    target = Path(path)
    kinds = {".csv": _csv, ".npy": _npy, ".npz": _npz, ".h5": _hdf5, ".hdf5": _hdf5}
    write = kinds.get(target.suffix.lower())
    if write is None:
        raise ExportError(f"--out must end in .csv, .npy, .npz or .h5, got {str(path)!r}")
    check_writable(target, overwrite, [recording.path])
    chosen = range(len(recording.channels)) if channels is None else map(recording.find, channels)
    span = recording.span(from_s, to_s)
    stretch = _Stretch(recording, tuple(chosen), *span, beside or {})
    with writing_whole(target, overwrite=overwrite) as file:
        write(stretch, file)
    return stretch.count


def _csv(stretch: _Stretch, file: BinaryIO) -> None:
    labels = map(_label, stretch.keys, stretch.units)
    file.write((",".join(_quoted(label) for label in [_TIME, *labels]) + "\n").encode())
    for times, span in stretch.blocks():
        # repr gives the fewest digits that make the same float again.
        columns = [map(repr, column.tolist()) for column in (times, *span.values.T)]
        file.write("".join(f"{','.join(row)}\n" for row in zip(*columns, strict=True)).encode())


def _label(name: str, unit: str) -> str:
    """Return the header of a channel, such that it is read back as this name and unit."""
    is_plain = unit == "1" and split_header(name) == (name, "")
    return name if is_plain else f"{name} [{unit}]"


def _quoted(label: str) -> str:
    label = " ".join(label.split())
    return '"' + label.replace('"', '""') + '"' if any(mark in label for mark in ',"') else label


def _npy(stretch: _Stretch, file: BinaryIO) -> None:
    fields = np.dtype(
        [(name, np.float64) for name in (_TIME, *map(_label, stretch.keys, stretch.units))]
    )
    _npy_header(file, fields, stretch.count)
    for times, span in stretch.blocks():
        rows = np.empty(times.size, fields)
        for name, column in zip(fields.names or (), (times, *span.values.T), strict=True):
            rows[name] = column
        file.write(rows.tobytes())


def _npy_header(file: Any, dtype: np.dtype[Any], count: int) -> None:  # noqa: ANN401  # a stream
    described = {
        "descr": np.lib.format.dtype_to_descr(dtype),
        "fortran_order": False,
        "shape": (count,),
    }
    np.lib.format.write_array_header_2_0(file, described)


def _npz(stretch: _Stretch, file: BinaryIO) -> None:
    over_range = 0
    # Written member by member: numpy.savez takes no array called "file", and whole arrays only.
    with zipfile.ZipFile(file, "w") as archive:
        with _member(archive, _TIME, stretch.count) as member:
            for first, last in stretch.bounds():
                member.write(stretch.times(first, last).tobytes())
        for key, position in zip(stretch.keys, stretch.channels, strict=True):
            with _member(archive, key, stretch.count) as member:
                for span in stretch.column(position):
                    member.write(span.values[:, 0].tobytes())
                    over_range += span.over_range
        document = np.array(_document(stretch, over_range))
        with archive.open("midfringe.npy", "w", force_zip64=True) as member:
            np.lib.format.write_array(member, document, allow_pickle=False)


@contextmanager
def _member(archive: zipfile.ZipFile, key: str, count: int) -> Iterator[Any]:
    """Open one float64 array of an NPZ file for writing, its header written."""
    with archive.open(f"{key}.npy", "w", force_zip64=True) as member:
        _npy_header(member, np.dtype(np.float64), count)
        yield member


def _document(stretch: _Stretch, over_range: int) -> str:
    return json.dumps(stretch.metadata() | {"over_range": over_range}, ensure_ascii=False)


def _hdf5(stretch: _Stretch, file: BinaryIO) -> None:
    h5py = require("h5py", "bench", "writing HDF5")
    metadata = stretch.metadata()
    keys = [_TIME, *stretch.keys]
    names = [key.replace("/", "∕") for key in keys]  # "/" makes groups
    over_range = 0
    with h5py.File(file, "w", track_order=True) as kept:
        for name, key in zip(names, keys, strict=True):
            made = kept.create_dataset(name, (stretch.count,), np.float64)
            made.attrs["unit"] = metadata["units"][key]
        place = 0
        for times, span in stretch.blocks():
            for name, column in zip(names, (times, *span.values.T), strict=True):
                kept[name][place : place + times.size] = column
            place += times.size
            over_range += span.over_range
        kept.attrs["rate_hz"] = metadata["rate_hz"]
        kept.attrs["columns"] = names
        kept.attrs["gaps"] = np.array(
            [gap[:2] for gap in metadata["gaps"]], dtype=np.int64
        ).reshape(-1, 2)
        kept.attrs["midfringe"] = _document(stretch, over_range)
