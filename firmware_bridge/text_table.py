"""CSV and text files to a table: the first section is read, the rest reported."""

import re
from collections.abc import Sequence

import numpy as np
from numpy.typing import NDArray

from firmware_bridge.calendar_stamps import stamps_to_seconds
from firmware_bridge.column_name import split_headers
from firmware_bridge.errors import BridgeError
from firmware_bridge.preamble import maybe_stated_rate_hz
from firmware_bridge.printed_digits import finest_digits
from firmware_bridge.table import Table
from firmware_bridge.text_encoding import decode_line, is_text, plain_text
from firmware_bridge.text_layout import are_two_kinds_of_commas
from firmware_bridge.text_section import TextSection, maybe_read_section

__all__ = ["TextError", "columns_kept", "read_text_table"]

_LISTED = 10  # sections
_HEAD_BYTES = 1 << 16
_GROUP = 3  # digits between the commas of thousands
_QUOTED = re.compile(rb'"([+-]?\d*),(\d+)([eE][+-]?\d+)?"')
_QUOTED_PAIR = re.compile(rb'"[+-]?\d*,\d+(?:[eE][+-]?\d+)?"[ \t]*,|,[ \t]*"[+-]?\d*,\d+')


class TextError(BridgeError):
    """A text without numbers in it."""


def read_text_table(data: bytes, name: str) -> Table:
    """Read a CSV or text file.

    Parameters
    ----------
    data : bytes
        The whole file, in any of the usual encodings and line ends.
    name : str
        Its name, for messages.

    Returns
    -------
    Table
        The first section; damaged lines are rows of NaN, lines of text are left out, and the
        remarks say how many and where.

    Raises
    ------
    TextError
        If there are no numbers in it.
    """
    data = plain_text(data)
    if not is_text(data):
        raise TextError(f"{name} is neither a text nor a known kind of recording")
    data = _with_points(stamps_to_seconds(data))
    section = maybe_read_section(data, 0, 0)
    if section is None:
        raise TextError(
            f"{name} has no line of numbers; a recording has one or more numbers a line"
        )
    if are_two_kinds_of_commas(section.layout, section.last_text):
        line = section.last_text.partition("\n")[0][:60]
        raise TextError(
            f"{name}: decimal commas and commas between the columns cannot be told apart "
            f"({line!r}); write it with semicolons between the columns, or with decimal points"
        )
    rest, unread = _rest_remarks(data, section)
    return _to_table(section, [*_fault_remarks(section), *rest], unread)


def _with_points(data: bytes) -> bytes:
    """Return quoted numbers with decimal commas, parted by commas, with decimal points.

    Groups of three digits throughout may be thousands: they are left as they are.
    """
    head = data[:_HEAD_BYTES]
    if not _QUOTED_PAIR.search(head):
        return data
    fractions = [match[2] for match in _QUOTED.finditer(head)]
    zeros = any(match[1].strip(b"+-") in (b"", b"0") for match in _QUOTED.finditer(head))
    if not zeros and all(len(digits) == _GROUP for digits in fractions):
        return data
    return _QUOTED.sub(rb"\1.\2\3", data)


def _fault_remarks(section: TextSection) -> list[str]:
    remarks = []
    for kind, what in (
        ("damaged", "could not be read and {are} taken as missing"),
        ("value", "with a value that could not be read {are} kept, that value missing"),
        ("text", "of text between the data {are} left out"),
    ):
        faults = [fault for fault in section.reader.faults if fault.kind == kind]
        if faults:
            count = len(faults)
            many = "line" if count == 1 else "lines"
            rule = what.format(are="is" if count == 1 else "are")
            shown = decode_line(faults[0].text.encode("latin-1", "replace"))[:40]
            remarks.append(f"{count} {many} {rule} (first: line {faults[0].line + 1}, {shown!r})")
    return remarks


def _rest_remarks(data: bytes, section: TextSection) -> tuple[list[str], int]:
    """Return a remark for each section after the first, and how many rows they have."""
    remarks: list[str] = []
    rest, number, unread = section.rest, 2, 0
    while rest is not None:
        if number > _LISTED:
            more = f"from line {rest[1] + 1} on more sections follow; not read"
            return [*remarks, more], unread + data.count(b"\n", rest[0])
        following = maybe_read_section(data, *rest)
        if following is None:
            nothing = f"from line {rest[1] + 1} on nothing could be read"
            return [*remarks, nothing], unread + data.count(b"\n", rest[0])
        rows = following.values().shape[0]
        unread += rows
        names = ", ".join(following.layout.header) or f"{following.layout.columns} columns"
        remarks.append(f"section {number} (line {rest[1] + 1}: {rows} rows of {names}) is not read")
        rest, number = following.rest, number + 1
    return remarks, unread


def _to_table(section: TextSection, remarks: list[str], unread: int) -> Table:
    layout, values = section.layout, section.values()
    header = layout.header or ("",) * layout.columns
    kept = columns_kept(values, header)
    names, stated = split_headers(header)
    units = layout.units or stated
    resolutions = _resolutions(section)
    return Table(
        format="csv" if layout.delimiter and layout.delimiter in ",;" else "text",
        columns=[np.ascontiguousarray(values[:, k]) for k in kept],
        names=[names[k] for k in kept],
        units=[units[k] for k in kept],
        resolutions=[resolutions[k] for k in kept],
        rate_hz=maybe_stated_rate_hz(layout.preamble),
        unread=unread,
        damaged=sum(f.kind == "damaged" and f.row < len(values) for f in section.reader.faults),
        remarks=remarks,
    )


def columns_kept(values: NDArray[np.float64], header: Sequence[str]) -> range:
    """Return the columns without the empty ones that a delimiter at a line's edge makes.

    Parameters
    ----------
    values : ndarray, shape (n, columns)
        Rows of numbers.
    header : sequence of str
        Names of all columns, empty where there is none.

    Returns
    -------
    range
        Positions from the first to the last column that holds something.
    """
    used = [bool(text) or not np.isnan(values[:, k]).all() for k, text in enumerate(header)]
    if True not in used:
        return range(len(used))
    return range(used.index(True), len(used) - used[::-1].index(True))


def _resolutions(section: TextSection) -> list[float]:
    """Return the last printed digit of each column.

    The finest of the first 20 lines and of the last 20, since trailing zeros may be left out, and
    the coarser of the two, since numbers of a fixed length lose decimals as they grow.
    """
    parts = (section.last_text.split("\n", 20)[:20], section.last_text.rsplit("\n", 20)[-20:])
    finest = [finest_digits(lines, section.layout) for lines in parts]
    return [max(pair) for pair in zip(*finest, strict=True)]
