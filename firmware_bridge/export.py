"""Recordings to CSV, NPZ and HDF5, to be opened by other programs alone.

All three hold a column ``time_s`` (seconds from the recording's first sample) and one column a
channel, one row a sample, NaN where a sample is missing or out of range. CSV has one header line,
``photodiode [V]``, and numbers in the fewest digits that give the same float back. NPZ and HDF5
hold beside that, as JSON under ``midfringe``: format version, rate and its uncertainty, units,
gaps, over-range count, remarks, source and time of export; HDF5 also as attributes.
"""

import json
import zipfile
from collections.abc import Iterator, Sequence
from dataclasses import dataclass
from datetime import UTC, datetime
from io import BytesIO, StringIO
from pathlib import Path
from typing import Any

import numpy as np
from numpy.typing import NDArray

from firmware_bridge.column_name import split_header
from firmware_bridge.errors import BridgeError
from firmware_bridge.trace import Recording, Span
from metro.extras import require
from metro.output import check_writable, write_whole

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

    def blocks(self) -> Iterator[tuple[NDArray[np.float64], Span]]:
        """Yield times, shape (n,), and values, shape (n, channels), of one block after another."""
        for first in range(self.start, self.stop, _BLOCK):
            last = min(first + _BLOCK, self.stop)
            span = self.recording.read(self.channels, first, last)
            yield np.arange(first, last) / self.recording.rate_hz, span

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
        }


def export_recording(
    recording: Recording,
    path: str | Path,
    *,
    channels: Sequence[str] | None = None,
    from_s: float | None = None,
    to_s: float | None = None,
    overwrite: bool = False,
) -> int:
    """Write a recording as CSV, NPZ or HDF5.

    Parameters
    ----------
    recording : Recording
        Opened.
    path : str or Path
        The file to be: its suffix ``.csv``, ``.npz``, ``.h5`` or ``.hdf5`` says the kind.
    channels : sequence of str, optional
        Names or column numbers, by default all.
    from_s, to_s : float, optional
        The stretch [s].
    overwrite : bool
        Whether an existing file may be replaced.

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
    write = {".csv": _csv, ".npz": _npz, ".h5": _hdf5, ".hdf5": _hdf5}.get(target.suffix.lower())
    if write is None:
        raise ExportError(f"--out must end in .csv, .npz or .h5, got {str(path)!r}")
    check_writable(target, overwrite, [recording.path])
    chosen = range(len(recording.channels)) if channels is None else map(recording.find, channels)
    stretch = _Stretch(recording, tuple(chosen), *recording.span(from_s, to_s))
    write_whole(target, write(stretch), overwrite=overwrite)
    return stretch.stop - stretch.start


def _csv(stretch: _Stretch) -> bytes:
    labels = map(_label, stretch.keys, stretch.units)
    text = StringIO()
    text.write(",".join(_quoted(label) for label in [_TIME, *labels]) + "\n")
    for times, span in stretch.blocks():
        # repr gives the fewest digits that make the same float again.
        columns = [map(repr, column.tolist()) for column in (times, *span.values.T)]
        text.writelines(f"{','.join(row)}\n" for row in zip(*columns, strict=True))
    return text.getvalue().encode()


def _label(name: str, unit: str) -> str:
    """Return the header of a channel, such that it is read back as this name and unit."""
    is_plain = unit == "1" and split_header(name) == (name, "")
    return name if is_plain else f"{name} [{unit}]"


def _quoted(label: str) -> str:
    label = " ".join(label.split())
    return '"' + label.replace('"', '""') + '"' if any(mark in label for mark in ',"') else label


def _arrays(stretch: _Stretch) -> tuple[dict[str, NDArray[np.float64]], dict[str, Any]]:
    """Return the columns and the metadata, the over-range values counted while they are read."""
    parts = list(stretch.blocks())
    values = np.concatenate([span.values for _, span in parts])
    arrays = {_TIME: np.concatenate([times for times, _ in parts])}
    arrays |= {key: np.ascontiguousarray(values[:, k]) for k, key in enumerate(stretch.keys)}
    return arrays, stretch.metadata() | {"over_range": sum(span.over_range for _, span in parts)}


def _npz(stretch: _Stretch) -> bytes:
    arrays, metadata = _arrays(stretch)
    document = np.array(json.dumps(metadata, ensure_ascii=False))
    memory = BytesIO()
    # Written member by member: numpy.savez takes no array called "file".
    with zipfile.ZipFile(memory, "w") as archive:
        for key, array in [*arrays.items(), ("midfringe", document)]:
            with archive.open(f"{key}.npy", "w", force_zip64=True) as member:
                np.lib.format.write_array(member, array, allow_pickle=False)
    return memory.getvalue()


def _hdf5(stretch: _Stretch) -> bytes:
    h5py = require("h5py", "bench", "writing HDF5")
    arrays, metadata = _arrays(stretch)
    memory = BytesIO()
    with h5py.File(memory, "w", track_order=True) as file:
        for key, array in arrays.items():
            dataset = file.create_dataset(key.replace("/", "∕"), data=array)  # "/" makes groups
            dataset.attrs["unit"] = metadata["units"][key]
        file.attrs["rate_hz"] = metadata["rate_hz"]
        file.attrs["columns"] = [key.replace("/", "∕") for key in arrays]
        file.attrs["gaps"] = np.array(
            [gap[:2] for gap in metadata["gaps"]], dtype=np.int64
        ).reshape(-1, 2)
        file.attrs["midfringe"] = json.dumps(metadata, ensure_ascii=False)
    return memory.getvalue()
