"""Open any recording, told apart by its content and not by its name."""

import os
import stat
import sys
import tempfile
import zipfile
from io import BytesIO
from pathlib import Path
from typing import TYPE_CHECKING

from firmware_bridge.errors import BridgeError
from firmware_bridge.recording_header import MAGIC
from firmware_bridge.trace import Recording

if TYPE_CHECKING:
    from firmware_bridge.table import Table
    from metro.units import Quantity

__all__ = ["OpenError", "open_lock_in", "open_recording"]

_HEAD_BYTES = 16
_NPY = b"\x93NUMPY"
_HDF5 = b"\x89HDF\r\n\x1a\n"
_ZIP = (b"PK\x03\x04", b"PK\x05\x06")
_REFUSED = (
    (b"\x1f\x8b", "is compressed (gzip); unpack it first"),
    (b"BZh", "is compressed (bzip2); unpack it first"),
    (b"\xfd7zXZ\x00", "is compressed (xz); unpack it first"),
    (b"MATLAB ", "is a MAT-file; save its columns as CSV, NPZ or HDF5"),
    (b"\xd0\xcf\x11\xe0", "is a spreadsheet or document; save the sheet as CSV"),
    (b"%PDF", "is a PDF document, not a recording"),
    (b"\x89PNG", "is a picture, not a recording"),
)


class OpenError(BridgeError):
    """A file that cannot be opened, or is of a kind that is no recording."""


def open_recording(
    path: str | os.PathLike[str],
    *,
    time: str | None = None,
    rate: "Quantity | str | None" = None,
    own_time: bool = False,
) -> Recording:
    """Open a recording: .mfr, CSV or text, NPY, NPZ or HDF5.

    Parameters
    ----------
    path : str or path-like
        The file; ``"-"`` is standard input.
    time : str, optional
        The time column: a header, or its number from 1 where the name is only digits
        (``"name:3"`` is the header "3"); ``"3+4"`` for seconds and microseconds in two columns.
        By default it is found by name, by unit, or by being regular and increasing.
    rate : Quantity or str, optional
        Samples per second, such as ``"4 kHz"``, where there is no time column.
    own_time : bool
        Whether ``from_s`` and ``to_s`` of its traces are the file's own stamps instead of times
        from the first sample.

    Returns
    -------
    Recording
        Channels on a regular grid; what is missing is NaN and listed in ``gaps``; what was
        assumed or left out stands in ``remarks``. Values are in SI units: a column in mV comes
        in V.

    Raises
    ------
    BridgeError
        If it cannot be opened, is no recording, or tells no rate.
    MissingExtraError
        If it is HDF5 and h5py is not installed.

    Examples
    --------
    >>> from firmware_bridge import open_recording
    >>> recording = open_recording("scope.csv")  # doctest: +SKIP
    >>> recording.trace("3", from_s=0.1)  # doctest: +SKIP
    """
    from metro.units import si

    rate_hz = None if rate is None else float(si(rate, "rate", "Hz", above=0.0))
    if os.fspath(path) == "-":
        return _open(sys.stdin.buffer.read(), "-", time, rate_hz, own_time)
    try:
        source = Path(path)
        # A pipe can be read only once, and has no length.
        mode = source.stat().st_mode
        if stat.S_ISCHR(mode) or stat.S_ISBLK(mode):  # it may have no end
            raise OpenError(f"cannot open {os.fspath(path)!r}: it is no regular file or pipe")
        is_file = stat.S_ISREG(mode)
        content: Path | bytes = source if is_file else source.read_bytes()
        return _open(content, str(source), time, rate_hz, own_time)
    except (OSError, ValueError) as error:
        if isinstance(error, BridgeError):
            raise
        reason = getattr(error, "strerror", None) or str(error)
        raise OpenError(f"cannot open {os.fspath(path)!r}: {reason.lower()}") from None


def open_lock_in(path: str | os.PathLike[str]) -> Recording:
    """Open the lock-in results of an .mfr recording, whether it holds samples or not.

    Parameters
    ----------
    path : path-like
        The recording.

    Returns
    -------
    Recording
        Amplitude and phase of each line, one value a result.

    Raises
    ------
    BridgeError
        If it is no .mfr recording or holds no lock-in result.
    """
    from firmware_bridge.lock_in_recording import LockInRecording

    return LockInRecording(path)


def _open(
    content: Path | bytes, name: str, time: str | None, rate_hz: float | None, own_time: bool
) -> Recording:
    head = _head(content)
    if not head:
        raise OpenError(f"{name} is empty")
    for magic, reason in _REFUSED:
        if head.startswith(magic):
            raise OpenError(f"{name} {reason}")
    if head.startswith(MAGIC[:4]):
        return _open_mfr(content, name, time, rate_hz)
    from firmware_bridge.tables import to_recording

    source = BytesIO(content) if isinstance(content, bytes) else content
    table = _read_table(head, source, name)
    return to_recording(table, name, time=time, rate_hz=rate_hz, own_time=own_time)


def _head(content: Path | bytes) -> bytes:
    if isinstance(content, bytes):
        return content[:_HEAD_BYTES]
    with content.open("rb") as file:
        return file.read(_HEAD_BYTES)


def _read_table(head: bytes, source: Path | BytesIO, name: str) -> "Table":
    from firmware_bridge.array_file import read_hdf5, read_npy, read_npz
    from firmware_bridge.text_table import read_text_table

    if head.startswith(_NPY):
        return read_npy(source, name)
    if head.startswith(_HDF5):
        return read_hdf5(source, name)
    if head.startswith(_ZIP):
        _refuse_other_archives(source, name)
        return read_npz(source, name)
    data = source.getvalue() if isinstance(source, BytesIO) else source.read_bytes()
    return read_text_table(data, name)


def _refuse_other_archives(source: Path | BytesIO, name: str) -> None:
    try:
        with zipfile.ZipFile(source) as archive:
            members = archive.namelist()
    except zipfile.BadZipFile:
        raise OpenError(f"{name} is a damaged archive") from None
    if "[Content_Types].xml" in members or "mimetype" in members:
        raise OpenError(f"{name} is a spreadsheet or document; save the sheet as CSV")
    if not members or not all(member.endswith(".npy") for member in members):
        raise OpenError(f"{name} is an archive of other files; unpack it first")


def _open_mfr(
    content: Path | bytes, name: str, time: str | None, rate_hz: float | None
) -> Recording:
    if time is not None or rate_hz is not None:
        option = "--time" if time is not None else "--rate"
        raise OpenError(f"{name} holds its own rate; {option} is for files that do not")
    if isinstance(content, Path):
        return _open_own(content)
    with tempfile.NamedTemporaryFile(suffix=".mfr") as file:
        file.write(content)
        file.flush()
        recording = _open_own(Path(file.name))
        recording.path = name
        return recording


def _open_own(path: Path) -> Recording:
    """Return the samples of a recording, or its lock-in results where it has nothing else."""
    from firmware_bridge.lock_in_recording import LockInRecording
    from firmware_bridge.recording import NoSampleError, open_mfr

    try:
        return open_mfr(path)
    except NoSampleError:
        return LockInRecording(path)
