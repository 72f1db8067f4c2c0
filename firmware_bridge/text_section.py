"""Sections of a text of numbers: where one ends and the next begins."""

import re
from collections.abc import Iterator, Sequence
from dataclasses import dataclass, field
from itertools import groupby

import numpy as np
from numpy.typing import NDArray

from firmware_bridge.going_on import goes_on
from firmware_bridge.text_encoding import decode_line
from firmware_bridge.text_fields import split_fields
from firmware_bridge.text_layout import TextLayout, maybe_find_layout
from firmware_bridge.text_lines import Fault, LineReader

__all__ = ["TextSection", "maybe_read_section"]

_HEAD_LINES = 1000
_HEAD_BYTES = 1 << 20
_STRETCH_BYTES = 16 << 20
_RUN = 10  # lines of one other shape in a row that count as a section and not as damage
_WORDS = re.compile(r"[^\W\d_][\w .()\[\]/°%√*^-]*")


@dataclass(eq=False)
class TextSection:
    """One section of a text: its rows, and where the next one starts.

    Parameters
    ----------
    layout : TextLayout
        How its lines are laid out.
    reader : LineReader
        Holds what was no row.
    first_line : int
        Number in the file of its first line of data, from 0.
    rest : tuple of (int, int), optional
        Byte offset and line number of the next section; None at the end of the file.
    blocks : list of ndarray, shape (n, columns)
        Its rows.
    last_text : str
        The last stretch of its text.
    """

    layout: TextLayout
    reader: LineReader
    first_line: int
    rest: tuple[int, int] | None = None
    blocks: list[NDArray[np.float64]] = field(default_factory=list)
    last_text: str = ""

    def values(self) -> NDArray[np.float64]:
        """Return its rows, shape (n, columns), without a last line cut short."""
        rows = np.concatenate(self.blocks)[: self.reader.rows]
        damaged = {fault.row for fault in self.reader.faults if fault.kind == "damaged"}
        stop = len(rows)
        while stop - 1 in damaged:
            stop -= 1
        return rows[:stop]


def maybe_read_section(data: bytes, offset: int, line: int) -> TextSection | None:
    """Read the section that begins at an offset.

    Parameters
    ----------
    data : bytes
        As :func:`firmware_bridge.text_encoding.plain_text` returns it.
    offset : int
        Where to begin.
    line : int
        The number of that line in the file, from 0.

    Returns
    -------
    TextSection or None
        None where no line of numbers follows.
    """
    head = data[offset : offset + _HEAD_BYTES].split(b"\n")[:_HEAD_LINES]
    layout = maybe_find_layout([decode_line(text) for text in head])
    if layout is None:
        return None
    start = offset + sum(len(text) + 1 for text in head[: layout.first_line])
    reader = LineReader(layout, line + layout.first_line, keeps_parts=True)
    section = TextSection(layout, reader, line + layout.first_line)
    stop = _blank_lines_after(data, start)
    for text in _stretches(data, start, stop):
        section.blocks += reader.read(text)
        section.last_text = text
        cut = _maybe_next_section(reader.faults, layout, section.blocks)
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


def _maybe_next_section(
    faults: Sequence[Fault], layout: TextLayout, blocks: Sequence[NDArray[np.float64]]
) -> Fault | None:
    """Return the first line of the next section, if the lines that are no rows tell of one."""
    rows: NDArray[np.float64] | None = None
    run: list[Fault] = []
    for _, group in groupby(
        faults, key=lambda fault: (fault.kind, fault.row * (fault.kind == "text"))
    ):
        members = list(group)
        if members[0].kind == "text":
            if members[0].row and _has_header(members, layout):
                rows = np.concatenate(blocks) if rows is None else rows
                if not goes_on(rows, members[0].row):
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
