"""What the commands put out: JSON, aligned tables, and files written whole or not at all."""

import json
import math
import os
import secrets
import shutil
import unicodedata
from collections.abc import Sequence
from pathlib import Path
from typing import Any

from metro.errors import MetroError

__all__ = ["OutputError", "check_writable", "table", "to_json", "write_whole"]


class OutputError(MetroError):
    """A file that cannot be written; nothing was left in its place."""


class OutputFailedError(OutputError):
    """A file that failed while it was written, as on a full disk."""

    exit_code = 3


def table(rows: Sequence[Sequence[Any]], header: Sequence[str] | None = None) -> str:
    """Return rows as a plain aligned table.

    Parameters
    ----------
    rows : sequence of sequences
        Cells; numbers to six digits, None as "unknown".
    header : sequence of str, optional
        Names of the columns.

    Returns
    -------
    str
        Lines without a final line end; columns two spaces apart, numbers to the right.
    """
    from metro.display import show_any

    cells = [[show_any(cell) for cell in row] for row in rows]
    lines = [list(header), *cells] if header else cells
    if not lines:
        return ""
    count = max(len(line) for line in lines)
    lines = [line + [""] * (count - len(line)) for line in lines]
    widths = [max(_width(line[i]) for line in lines) for i in range(count)]
    right = [bool(rows) and all(_is_number(row, i) for row in rows) for i in range(count)]
    return "\n".join(
        "  ".join(_pad(line[i], widths[i], right[i]) for i in range(count)).rstrip()
        for line in lines
    )


def _is_number(row: Sequence[Any], index: int) -> bool:
    return index < len(row) and isinstance(row[index], (int, float))


def _width(text: str) -> int:
    return sum(0 if unicodedata.combining(c) else 1 for c in text)


def _pad(text: str, width: int, right: bool) -> str:  # private, named at the call
    blank = " " * (width - _width(text))
    return blank + text if right else text + blank


def to_json(document: Any) -> str:  # noqa: ANN401  # any document
    """Return a document as JSON text, quantities in their JSON form.

    Parameters
    ----------
    document : object
        Dicts, lists, numbers, text; measured values, quantities and numpy arrays in them.

    Returns
    -------
    str
        Two-space indented, UTF-8 letters kept; what is not finite is null.
    """
    ready = plain(document)
    # Indented for people; a spectrum of a million points is for programs and stays on one line.
    indent = None if _longest_list(ready) > 1000 else 2
    return json.dumps(ready, indent=indent, ensure_ascii=False, allow_nan=False)


def _longest_list(value: Any) -> int:  # noqa: ANN401  # plain JSON types
    if isinstance(value, dict):
        return max((_longest_list(item) for item in value.values()), default=0)
    if isinstance(value, list):
        if len(value) > 1000:
            return len(value)
        return max((_longest_list(item) for item in value), default=len(value))
    return 0


def plain(value: Any) -> Any:  # noqa: ANN401  # any document; one return a kind
    """Return a value in plain JSON types.

    Parameters
    ----------
    value : object
        As for :func:`to_json`.

    Returns
    -------
    object
        Dicts, lists, text, numbers, booleans and None.

    Raises
    ------
    TypeError
        If there is no JSON form, as for complex numbers.
    """
    if value is None or isinstance(value, (str, bool, int)):
        return value
    if isinstance(value, float):
        return float(value) if math.isfinite(value) else None
    if isinstance(value, dict):
        return {str(key): plain(item) for key, item in value.items()}
    if isinstance(value, (list, tuple)):
        return [plain(item) for item in value]
    if hasattr(value, "to_dict"):
        return plain(value.to_dict())
    if hasattr(value, "magnitude"):
        from metro.measured import Measured

        return plain(Measured(value).to_dict())
    if hasattr(value, "tolist") and value.dtype.kind in "biufUS":
        return plain(value.tolist())
    if isinstance(value, os.PathLike):
        return os.fspath(value)
    raise TypeError(f"{type(value).__name__} has no JSON form")


def check_writable(path: str | os.PathLike[str], overwrite: bool = False) -> Path:  # as the option
    """Refuse a file that could not be written, before long work is begun.

    Parameters
    ----------
    path : path
        The file to be.
    overwrite : bool
        Whether an existing file may be replaced.

    Returns
    -------
    Path
        The same path.

    Raises
    ------
    OutputError
        If it exists, is a directory, or its directory is missing or closed to us.
    """
    path = Path(path)
    try:
        problem = _problem(path, overwrite)
    except OSError as error:
        problem = f"cannot write {path}: {_reason(error)}"
    if problem:
        raise OutputError(problem)
    return path


def _problem(path: Path, overwrite: bool) -> str:
    """Return why a file cannot be written; empty where nothing speaks against it."""
    parent = path.parent
    if path.is_dir():
        return f"cannot write {path}: it is a directory"
    if _is_device(path):
        return ""
    if not parent.exists():
        return f"cannot write {path}: there is no directory {parent}"
    if not parent.is_dir():
        return f"cannot write {path}: {parent} is not a directory"
    if path.exists() and not overwrite:
        return f"{path} exists; give --overwrite to replace it"
    if not os.access(parent, os.W_OK | os.X_OK):
        return f"cannot write {path}: no permission to write in {parent}"
    if len(os.fsencode(path.name)) > 255:  # what Linux and macOS file systems take
        return f"cannot write {path}: file name too long"
    return ""


def write_whole(
    path: str | os.PathLike[str], data: bytes | str, *, overwrite: bool = False
) -> None:
    """Write a file whole or not at all.

    Parameters
    ----------
    path : path
        The file to be; a device such as ``/dev/null`` is written to directly.
    data : bytes or str
        Its content; text as UTF-8.
    overwrite : bool
        Whether an existing file may be replaced.

    Raises
    ------
    OutputError
        If it exists or cannot be written; what was there before is then still there.
    """
    path = check_writable(path, overwrite).resolve()  # a link stays, its target is replaced
    content = data.encode() if isinstance(data, str) else data
    if _is_device(path):
        _fill(path, path, content, "wb")
        return
    # In the same directory, so that the final rename stays within one file system.
    temporary = path.with_name(f".midfringe-{os.getpid()}-{secrets.token_hex(4)}.part")
    try:
        _fill(temporary, path, content, "xb")
        _put_in_place(temporary, path, overwrite)
    finally:
        temporary.unlink(missing_ok=True)


def _is_device(path: Path) -> bool:
    return path.exists() and not path.is_file()


def _fill(target: Path, named: Path, content: bytes, mode: str) -> None:
    try:
        file = target.open(mode)
    except OSError as error:
        raise OutputError(f"cannot write {named}: {_reason(error)}") from None
    try:
        with file:
            file.write(content)
            file.flush()
            if mode == "xb":
                os.fsync(file.fileno())
    except OSError as error:
        raise OutputFailedError(
            f"writing {named} failed: {_reason(error)}; nothing was left there"
        ) from None


def _put_in_place(temporary: Path, path: Path, overwrite: bool) -> None:
    try:
        if overwrite:
            if path.exists():
                shutil.copymode(path, temporary)
            temporary.replace(path)
            return
        os.link(temporary, path)  # refuses a file that appeared meanwhile; a rename would not
    except FileExistsError:
        raise OutputError(f"{path} exists; give --overwrite to replace it") from None
    except OSError as error:
        if overwrite or path.exists():
            raise OutputError(f"cannot write {path}: {_reason(error)}") from None
        temporary.replace(path)  # a file system without hard links


def _reason(error: OSError) -> str:
    return (error.strerror or str(error)).lower()
