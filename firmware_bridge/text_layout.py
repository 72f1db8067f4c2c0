"""How a text of numbers is laid out: delimiter, decimal mark, columns, header and units lines."""

from collections.abc import Sequence
from dataclasses import dataclass

from firmware_bridge.header_line import find_header
from firmware_bridge.text_fields import maybe_number, split_fields

__all__ = ["TextLayout", "are_two_kinds_of_commas", "maybe_find_layout"]

_MINIMUM_RUN = 3  # lines alike in a row that count as data and not as numbers in a preamble

_COMMA_LINES = 1000

# In the order of preference where several fit equally well.
_CANDIDATES: tuple[tuple[str | None, str], ...] = (
    ("\t", "."), (";", "."), (",", "."), (None, "."), ("|", "."),
    ("\t", ","), (";", ","), (None, ","),
)  # fmt: skip


@dataclass(frozen=True)
class TextLayout:
    """The layout of one section of a text of numbers.

    Attributes
    ----------
    delimiter : str or None
        What separates the fields; None for any run of blanks.
    decimal : str
        The decimal mark, ``"."`` or ``","``.
    columns : int
        Fields a line, empty ones at the edges included.
    filled : tuple of int
        Columns, counted from 0, that hold something in the first line of data.
    first_line : int
        Index of the first line of data among the lines given.
    header : tuple of str
        Column names, empty where the text has no header line.
    units : tuple of str
        The words of a line of units, empty where there is none.
    preamble : tuple of str
        The lines before the data.
    """

    delimiter: str | None
    decimal: str
    columns: int
    filled: tuple[int, ...]
    first_line: int
    header: tuple[str, ...]
    units: tuple[str, ...]
    preamble: tuple[str, ...]


def maybe_find_layout(lines: Sequence[str]) -> TextLayout | None:
    """Find out how a text of numbers is laid out.

    Parameters
    ----------
    lines : sequence of str
        The first lines of the text, without line ends.

    Returns
    -------
    TextLayout or None
        The layout of the first block of data; None where no line holds numbers.
    """
    best: tuple[tuple[int, int], str | None, str, int, int] | None = None
    for delimiter, decimal in _candidates("\n".join(lines)):
        counts = [_count_numbers(line, delimiter, decimal) for line in lines]
        start, columns = _first_block(counts, lines)
        score = (sum(count > 0 for count in counts), columns)
        if columns and (best is None or score > best[0]):
            best = (score, delimiter, decimal, start, columns)
    if best is None:
        return None
    _, delimiter, decimal, start, columns = best
    if (delimiter, columns) == (",", 2) and _is_decimal_comma(lines[start:]):
        delimiter, decimal, columns = None, ",", 1
    if columns == 1:
        delimiter = None
    return _describe(lines, delimiter, decimal, start, columns)


def _candidates(text: str) -> list[tuple[str | None, str]]:
    """Return what may be a layout of the text: marks that do not occur in it part nothing."""
    return [
        (delimiter, decimal)
        for delimiter, decimal in _CANDIDATES
        if (delimiter is None or delimiter in text) and (decimal == "." or "," in text)
    ]


def _count_numbers(line: str, delimiter: str | None, decimal: str) -> int:
    """Return the number of fields of a line of numbers and empty fields; 0 for any other line."""
    fields = split_fields(line, delimiter)
    filled = [field for field in fields if field]
    if filled and all(maybe_number(field, decimal) is not None for field in filled):
        return len(fields)
    return 0


def _first_block(counts: list[int], lines: Sequence[str]) -> tuple[int, int]:
    """Return start and columns of the first block of lines alike; (0, 0) where there is none."""
    runs: list[list[int]] = []  # start, columns, length
    for index, count in enumerate(counts):
        if runs and count == runs[-1][1]:
            runs[-1][2] += 1
        elif lines[index].strip(" \t,;|"):
            runs.append([index, count, 1])
    blocks = [run for run in runs if run[1]]
    long_ones = [run for run in blocks if run[2] >= _MINIMUM_RUN]
    if not long_ones:
        start, columns, _ = max(blocks, key=lambda run: run[2], default=[0, 0, 0])
        return start, columns
    first = long_ones[0]
    after = runs[runs.index(first) + 1 :][:1]
    # A few numbers, directly followed by many more lines of another shape, are a preamble.
    if after and after[0][1] and first[2] < 10 and after[0][2] > 10 * first[2]:
        first = after[0]
    return first[0], first[1]


def _is_decimal_comma(lines: Sequence[str]) -> bool:
    """Tell whether lines like ``0,052`` are one number each: no second field could start with 0."""
    pairs = [line.strip().split(",") for line in lines if line.count(",") == 1]
    if len(pairs) < sum(bool(line.strip()) for line in lines):
        return False
    fractions = [pair[1] for pair in pairs]
    return all(text.isdecimal() for text in fractions) and any(
        len(text) > 1 and text.startswith("0") for text in fractions
    )


def are_two_kinds_of_commas(layout: TextLayout, text: str) -> bool:
    """Tell whether lines like ``0,052,1,340`` are numbers with decimal commas parted by commas.

    Parameters
    ----------
    layout : TextLayout
        As found.
    text : str
        Lines of it.

    Returns
    -------
    bool
        True if every second field is digits of one length, some with a zero ahead, and no other
        field has decimals; or if there are half as many names as fields.
    """
    if layout.delimiter != "," or layout.columns % 2 or layout.columns < 4:
        return False
    lines = text.split("\n", _COMMA_LINES)[:_COMMA_LINES]
    rows = [[field.strip() for field in line.split(",")] for line in lines if line.strip()]
    rows = [row for row in rows if len(row) == layout.columns]
    wholes = [field.lstrip("+-") for row in rows for field in row[::2]]
    if not rows or not all(map(str.isdecimal, wholes)):
        return False
    fractions = list(zip(*(row[1::2] for row in rows), strict=True))
    if not all(map(str.isdecimal, (field for column in fractions for field in column))):
        return False
    names = [word for word in (layout.preamble or ("",))[-1].split(",") if word.strip()]
    if len(names) * 2 == layout.columns and not any(map(str.isdecimal, names)):
        return True
    return all(
        len(set(map(len, column))) == 1
        and len(column[0]) > 1
        and any(field.startswith("0") for field in column)
        for column in fractions
    )


def _describe(
    lines: Sequence[str], delimiter: str | None, decimal: str, start: int, columns: int
) -> TextLayout:
    first = split_fields(lines[start], delimiter)
    filled = tuple(i for i, field in enumerate(first) if field)
    start = _extend_upwards(lines, delimiter, decimal, start, columns, filled)
    preamble = tuple(lines[:start])
    header, units = find_header(preamble, delimiter, columns)
    return TextLayout(delimiter, decimal, columns, filled, start, header, units, preamble)


def _extend_upwards(
    lines: Sequence[str],
    delimiter: str | None,
    decimal: str,
    start: int,
    columns: int,
    filled: tuple[int, ...],
) -> int:
    """Return the first line of data where a preamble stands to the left of it.

    Some oscilloscopes write the settings into the first columns of the first lines of data.
    """
    while start and len(filled) < columns:
        fields = split_fields(lines[start - 1], delimiter)
        if len(fields) != columns or any(maybe_number(fields[i], decimal) is None for i in filled):
            break
        start -= 1
    return start
