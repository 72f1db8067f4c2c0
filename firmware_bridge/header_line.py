"""The lines above the data that name its columns and their units."""

import re
from collections.abc import Sequence

from firmware_bridge.text_fields import split_fields
from firmware_bridge.unit_word import is_unit_word

__all__ = ["find_header"]

_COMMENT_MARKS = "#%;!/* \t"


def find_header(
    preamble: Sequence[str], delimiter: str | None, columns: int
) -> tuple[tuple[str, ...], tuple[str, ...]]:
    """Return the names and the words of units from the last lines before the data.

    Parameters
    ----------
    preamble : sequence of str
        The lines before the data.
    delimiter : str or None
        What separates the fields of the data; None for any run of blanks.
    columns : int
        Fields a line.

    Returns
    -------
    tuple of (tuple of str, tuple of str)
        Names and units, one a column each, or empty where there is no such line.
    """
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
