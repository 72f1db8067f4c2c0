"""What the commands put out: JSON, aligned tables, and files written whole or not at all."""

import json
import math
import os
import unicodedata
from collections.abc import Sequence
from typing import Any

from metro.whole_file import (
    OutputError,
    OutputFailedError,
    check_document,
    check_writable,
    write_whole,
    writing_whole,
)

__all__ = [
    "OutputError",
    "OutputFailedError",
    "check_document",
    "check_writable",
    "plain",
    "table",
    "to_json",
    "write_whole",
    "writing_whole",
]


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
