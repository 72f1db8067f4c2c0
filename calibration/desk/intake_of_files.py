"""Files for the ledger: what ``midfringe lines --json`` printed, and recordings themselves."""

import hashlib
import json
import sys
from pathlib import Path
from typing import TYPE_CHECKING, Any

from calibration.desk.ledger_errors import LedgerError
from calibration.desk.line_entry import LineEntry, entries_of_document
from calibration.desk.utc import iso_of, parse_time, unix_of

if TYPE_CHECKING:
    from calibration.desk.measured_lines import Measuring

__all__ = ["is_document", "line_entries_of_file", "result_entries"]


def is_document(path: str) -> bool:
    """Return whether a file is JSON, as ``midfringe lines --json`` prints it, not a recording.

    Parameters
    ----------
    path : str
        The file; ``-``, standard input, is taken as JSON.

    Returns
    -------
    bool
        By its suffix or its first letter.
    """
    if path == "-" or path.lower().endswith(".json"):
        return True
    try:
        with Path(path).open("rb") as file:
            return file.read(64).lstrip().startswith(b"{")
    except OSError:
        return False  # whoever opens it says why it cannot be


def result_entries(
    path: str,
    *,
    measuring: "Measuring",
    time: str | None,
    temperature_k: float | None,
    bench: str,
) -> list[LineEntry]:
    """Return the line results in a file of either kind.

    Parameters
    ----------
    path : str
        JSON from ``midfringe lines``, or a recording, which is measured here.
    measuring : Measuring
        How lines of a recording are measured.
    time : str or None
        As for :func:`line_entries_of_file`.
    temperature_k : float or None
        Temperature meanwhile [K].
    bench : str
        Which bench.

    Returns
    -------
    list of LineEntry
        One a line.

    Raises
    ------
    LedgerError
        If the file holds no lines, or nothing says when they were measured.
    """
    if is_document(path):
        return line_entries_of_file(path, time=time, temperature_k=temperature_k, bench=bench)
    from calibration.desk.measured_lines import entries_of_recording
    from calibration.file_hash import sha256_of
    from calibration.session import photodiode_name
    from firmware_bridge.opening import open_recording

    recording = open_recording(path)
    drives = [c.name for c in recording.channels if c.name.strip().lower() == "drive"]
    begun_s = recording.start_unix_s
    if time is None and begun_s is None:
        raise _no_time(path)
    middle_s = (
        unix_of(parse_time(time, "--time"))
        if time is not None
        else float(begun_s or 0.0) + 0.5 * recording.duration_s
    )
    return entries_of_recording(
        recording,
        photodiode_name(recording),
        f"name:{drives[0]}" if len(drives) == 1 else None,
        measuring,
        unix_s=middle_s,
        temperature_k=temperature_k,
        sha256=sha256_of(path),
        bench=bench,
    )


def line_entries_of_file(
    path: str, *, time: str | None, temperature_k: float | None, bench: str
) -> list[LineEntry]:
    """Return the line results in a file.

    Parameters
    ----------
    path : str
        What ``midfringe lines --json`` or ``--out`` wrote.
    time : str or None
        The middle of the recording, ISO 8601, where the file does not say when it began.
    temperature_k : float or None
        Temperature meanwhile [K].
    bench : str
        Which bench.

    Returns
    -------
    list of LineEntry
        One a line.

    Raises
    ------
    LedgerError
        If the file cannot be read, holds no lines, or nothing says when they were measured.
    """
    try:
        content = sys.stdin.buffer.read() if path == "-" else Path(path).read_bytes()
        document = json.loads(content)
    except OSError as error:
        raise LedgerError(f"{path}: {(error.strerror or str(error)).lower()}") from None
    except ValueError as error:
        raise LedgerError(f"{path} is no JSON document: {error}") from None
    if not isinstance(document, dict):
        raise LedgerError(f"{path} must be what 'midfringe lines --json' prints")
    return entries_of_document(
        document,
        time=_moment(document, time, path),
        place=path,
        temperature_k=temperature_k,
        source=str(document.get("file") or path),
        sha256=hashlib.sha256(content).hexdigest(),
        bench=bench,
    )


def _moment(document: dict[str, Any], time: str | None, path: str) -> str:
    """Return the middle of the recording."""
    if time is not None:
        return parse_time(time, "--time")
    start = document.get("start")
    if not isinstance(start, str):
        raise _no_time(path)
    duration = document.get("duration") or {}
    half_s = 0.5 * float(duration.get("value") or 0.0) if isinstance(duration, dict) else 0.0
    return iso_of(unix_of(parse_time(start, f"{path}: start")) + half_s)


def _no_time(path: str) -> LedgerError:
    return LedgerError(
        f"{path} does not say when it was measured: give --time, such as 2026-03-01T12:00:00Z"
    )
