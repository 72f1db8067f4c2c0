"""CSV and text files to a table: the first section is read, the rest reported."""

import math
import re
from collections.abc import Iterator, Sequence
from dataclasses import dataclass, field
from itertools import groupby

import numpy as np
from numpy.typing import NDArray

from firmware_bridge.calendar_stamps import stamps_to_seconds
from firmware_bridge.column_name import split_header
from firmware_bridge.errors import BridgeError
from firmware_bridge.preamble import maybe_stated_rate_hz
from firmware_bridge.table import Table
from firmware_bridge.text_encoding import decode_line, is_text, plain_text
from firmware_bridge.text_layout import TextLayout, maybe_find_layout, split_fields
from firmware_bridge.text_lines import Fault, LineReader

__all__ = ["TextError", "read_text_table"]

_HEAD_LINES = 1000
_HEAD_BYTES = 1 << 20
_STRETCH_BYTES = 16 << 20
_RUN = 10  # lines of one other shape in a row that count as a section and not as damage
_LISTED = 10  # sections
_WORDS = re.compile(r"[^\W\d_][\w .()\[\]/°%√*^-]*")
_PRINTED = re.compile(r"[+-]?\d*[.,]?(?P<decimals>\d*)(?:[eE](?P<exponent>[+-]?\d{1,3}))?")


class TextError(BridgeError):
    """A text without numbers in it."""


@dataclass(eq=False)
class _Section:
    """One section: its rows, and where the next section starts (None at the end of the file)."""

    layout: TextLayout
    reader: LineReader
    first_line: int
    rest: tuple[int, int] | None = None  # byte offset and line number
    blocks: list[NDArray[np.float64]] = field(default_factory=list)
    last_text: str = ""

    def values(self) -> NDArray[np.float64]:
        rows = np.concatenate(self.blocks)[: self.reader.rows]
        damaged = {fault.row for fault in self.reader.faults if fault.kind == "damaged"}
        stop = len(rows)
        while stop - 1 in damaged:  # a last line cut short is no sample
            stop -= 1
        return rows[:stop]


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
    data = stamps_to_seconds(data)
    section = _maybe_read_section(data, 0, 0)
    if section is None:
        raise TextError(
            f"{name} has no line of numbers; a recording has one or more numbers a line"
        )
    return _to_table(section, [*_fault_remarks(section), *_rest_remarks(data, section)])


def _maybe_read_section(data: bytes, offset: int, line: int) -> _Section | None:
    head = data[offset : offset + _HEAD_BYTES].split(b"\n")[:_HEAD_LINES]
    layout = maybe_find_layout([decode_line(text) for text in head])
    if layout is None:
        return None
    start = offset + sum(len(text) + 1 for text in head[: layout.first_line])
    reader = LineReader(layout, line + layout.first_line)
    section = _Section(layout, reader, line + layout.first_line)
    stop = _blank_lines_after(data, start)
    for text in _stretches(data, start, stop):
        section.blocks += reader.read(text)
        section.last_text = text
        cut = _maybe_next_section(reader.faults, layout)
        if cut is not None:
            section.rest = (_line_offset(data, start, cut.line - section.first_line), cut.line)
            reader.rows = cut.row
            reader.faults = [fault for fault in reader.faults if fault.line < cut.line]
            return section
    if data[stop:].strip():
        while data[stop : stop + 1] == b"\n":
            stop += 1
        section.rest = (stop, section.first_line + data.count(b"\n", start, stop))
    return section


def _stretches(data: bytes, start: int, stop: int) -> Iterator[str]:
    while start < stop:
        end = start + _STRETCH_BYTES
        end = stop if end >= stop else (data.find(b"\n", end, stop) + 1 or stop)
        yield data[start:end].decode("latin-1").removesuffix("\n")
        start = end


def _blank_lines_after(data: bytes, start: int) -> int:
    """Return where two blank lines part the section from the next, else the end of the data."""
    found = data.find(b"\n\n\n", start)
    # Where every line is followed by blank ones they part nothing.
    return found + 1 if found > 0 and b"\n" in data[start:found].strip() else len(data)


def _maybe_next_section(faults: Sequence[Fault], layout: TextLayout) -> Fault | None:
    """Return the first line of the next section, if the lines that are no rows tell of one."""
    run: list[Fault] = []
    for _, group in groupby(
        faults, key=lambda fault: (fault.kind, fault.row * (fault.kind == "text"))
    ):
        members = list(group)
        if members[0].kind == "text":
            if members[0].row and _has_header(members, layout):
                return members[0]
            continue
        for fault in members:
            follows = run and (run[-1].row + 1, run[-1].fields) == (fault.row, fault.fields)
            run = [*run, fault] if follows and len(run) < _RUN else [fault]
            if len(run) == _RUN and fault.fields != layout.columns:
                return run[0]
    return None


def _has_header(faults: Sequence[Fault], layout: TextLayout) -> bool:
    """Tell whether a section begins here: the first header again, or another one in its place."""
    if not layout.header:
        return False
    texts = [fault.text.strip() for fault in faults]
    header = [line.strip() for line in layout.preamble if line.strip()][-2:]
    if any(text in header for text in texts):
        return True
    fields = split_fields(texts[-1], layout.delimiter)
    return len(fields) > 1 and all(_WORDS.fullmatch(text) for text in fields if text)


def _line_offset(data: bytes, start: int, lines: int) -> int:
    """Return the byte at which the line stands that is ``lines`` after the one at ``start``."""
    if lines == 0:
        return start
    ends = np.flatnonzero(np.frombuffer(data, np.uint8, offset=start) == ord("\n"))
    return start + int(ends[lines - 1]) + 1


def _fault_remarks(section: _Section) -> list[str]:
    remarks = []
    for kind, what in (
        ("damaged", "could not be read and {are} taken as missing"),
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


def _rest_remarks(data: bytes, section: _Section) -> list[str]:
    """Return a remark for each section after the first."""
    remarks: list[str] = []
    rest, number = section.rest, 2
    while rest is not None:
        if number > _LISTED:
            return [*remarks, f"from line {rest[1] + 1} on more sections follow; not read"]
        following = _maybe_read_section(data, *rest)
        if following is None:
            return [*remarks, f"from line {rest[1] + 1} on nothing could be read"]
        rows = following.values().shape[0]
        names = ", ".join(following.layout.header) or f"{following.layout.columns} columns"
        remarks.append(f"section {number} (line {rest[1] + 1}: {rows} rows of {names}) is not read")
        rest, number = following.rest, number + 1
    return remarks


def _to_table(section: _Section, remarks: list[str]) -> Table:
    layout, values = section.layout, section.values()
    header = layout.header or ("",) * layout.columns
    kept = _columns_kept(values, header)
    parts = [split_header(text) for text in header]
    units = layout.units or tuple(unit for _, unit in parts)
    resolutions = _resolutions(section)
    return Table(
        format="csv" if layout.delimiter and layout.delimiter in ",;" else "text",
        columns=[np.ascontiguousarray(values[:, k]) for k in kept],
        names=[parts[k][0] for k in kept],
        units=[units[k] for k in kept],
        resolutions=[resolutions[k] for k in kept],
        rate_hz=maybe_stated_rate_hz(layout.preamble),
        remarks=remarks,
    )


def _columns_kept(values: NDArray[np.float64], header: Sequence[str]) -> range:
    """Return the columns without the empty ones that a delimiter at a line's edge makes."""
    used = [bool(text) or not np.isnan(values[:, k]).all() for k, text in enumerate(header)]
    if True not in used:
        return range(len(used))
    return range(used.index(True), len(used) - used[::-1].index(True))


def _resolutions(section: _Section) -> list[float]:
    """Return the last printed digit of each column.

    The finest of the first 20 lines and of the last 20, since trailing zeros may be left out, and
    the coarser of the two, since numbers of a fixed length lose decimals as they grow.
    """
    parts = (section.last_text.split("\n", 20)[:20], section.last_text.rsplit("\n", 20)[-20:])
    finest = [_finest_digits(lines, section.layout) for lines in parts]
    return [max(pair) for pair in zip(*finest, strict=True)]


def _finest_digits(lines: Sequence[str], layout: TextLayout) -> list[float]:
    rows = [split_fields(line, layout.delimiter) for line in lines]
    digits = [[_last_digit(field) for field in row] for row in rows if len(row) == layout.columns]
    columns = [[row[k] for row in digits if row[k]] for k in range(layout.columns)]
    return [min(column, default=0.0) for column in columns]


def _last_digit(text: str) -> float:
    match = _PRINTED.fullmatch(text)
    if match is None or not text:
        return 0.0
    digit = float(f"1e{int(match['exponent'] or 0) - len(match['decimals'])}")
    return digit if math.isfinite(digit) else 0.0
