"""How a text of numbers is laid out: delimiter, decimal mark, columns, header and units lines."""

import csv
import re
from collections.abc import Sequence
from dataclasses import dataclass

from firmware_bridge.column_name import is_unit_word

__all__ = ["TextLayout", "maybe_find_layout", "maybe_number", "split_fields"]

_NUMBER = re.compile(r"[+-]?(\d+\.?\d*|\.\d+)([eE][+-]?\d+)?")
_COMMA_NUMBER = re.compile(r"[+-]?\d*(,\d+)?([eE][+-]?\d+)?")
_NOT_FINITE = {"nan", "inf", "infinity"}
_COMMENT_MARKS = "#%;!/* \t"
_MINIMUM_RUN = 3  # lines alike in a row that count as data and not as numbers in a preamble

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


def split_fields(line: str, delimiter: str | None) -> list[str]:
    """Return the fields of a line, without the blanks and quotation marks around them.

    Parameters
    ----------
    line : str
        One line of text.
    delimiter : str or None
        What separates fields; None for any run of blanks.

    Returns
    -------
    list of str
        The fields; empty ones are kept where there is a delimiter.
    """
    if delimiter is None:
        return line.replace('"', "").split()
    if '"' in line and delimiter in line:
        # strict=False of the csv module never refuses a line; only a NUL or a stray line end could.
        line = line.replace("\0", "").replace("\r", " ").replace("\n", " ")
        fields = next(csv.reader([line], delimiter=delimiter, skipinitialspace=True), [])
        return [field.strip() for field in fields]
    return [field.strip().strip('"') for field in line.split(delimiter)]


def maybe_number(field: str, decimal: str = ".") -> float | None:
    """Return the number that a field holds, or None.

    Parameters
    ----------
    field : str
        One field, without blanks around it.
    decimal : str
        The decimal mark.

    Returns
    -------
    float or None
        The number; NaN and infinity are numbers here.
    """
    if field.lstrip("+-").lower() in _NOT_FINITE:
        return float(field)
    if decimal == ",":
        if "." in field or not _COMMA_NUMBER.fullmatch(field):
            return None
        field = field.replace(",", ".")
    return float(field) if _NUMBER.fullmatch(field) else None


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
    for delimiter, decimal in _CANDIDATES:
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


def _describe(
    lines: Sequence[str], delimiter: str | None, decimal: str, start: int, columns: int
) -> TextLayout:
    first = split_fields(lines[start], delimiter)
    filled = tuple(i for i, field in enumerate(first) if field)
    start = _extend_upwards(lines, delimiter, decimal, start, columns, filled)
    preamble = tuple(lines[:start])
    header, units = _find_header(preamble, delimiter, columns)
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


def _find_header(
    preamble: Sequence[str], delimiter: str | None, columns: int
) -> tuple[tuple[str, ...], tuple[str, ...]]:
    """Return the names and the words of units from the last lines before the data."""
    rows = [line for line in preamble if line.strip(_COMMENT_MARKS + "-=_,|")][-2:]
    fields = [_header_fields(line, delimiter, columns) for line in rows]
    if not fields or not fields[-1]:
        return (), ()
    share = _share_of_units(fields[-1])
    if len(fields) == 2 and fields[0] and share >= 0.5 > _share_of_units(fields[0]):
        return tuple(fields[0]), tuple(fields[-1])
    return tuple(fields[-1]), tuple(fields[-1]) if share == 1 else ()


def _header_fields(line: str, delimiter: str | None, columns: int) -> list[str]:
    """Return the fields of a header line if there is one for each column, else an empty list."""
    bare = line.lstrip("#%!/*")
    attempts = [split_fields(text, delimiter) for text in (bare, bare.strip(), line)]
    if delimiter is None:
        attempts = [split_fields(bare, mark) for mark in ",;\t|"] + attempts
        attempts += [
            re.split(r"\s{2,}|\t+", bare.strip()),
            re.split(r"\s+(?![(\[/])", bare.strip()),
        ]
    for fields in attempts:
        if len(fields) == columns and any(re.search(r"[^\W\d_]", field) for field in fields):
            return fields
    return []


def _share_of_units(fields: Sequence[str]) -> float:
    """Return how many of the words that are there are units, from 0 to 1."""
    words = [field.strip("()[]") for field in fields if field.strip("()[]")]
    return sum(map(is_unit_word, words)) / len(words) if words else 0.0
