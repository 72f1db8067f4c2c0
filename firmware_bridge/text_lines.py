"""Lines of numbers to an array, at the speed of numpy's C parser, damaged lines set aside."""

from collections.abc import Sequence
from dataclasses import dataclass, field

import numpy as np
from numpy.typing import NDArray

from firmware_bridge.text_fields import maybe_number, split_fields
from firmware_bridge.text_layout import TextLayout

__all__ = ["Fault", "LineReader"]

_FEW = 24  # lines: below this, reading them one by one costs less than trying halves
_MISSING = {"", "na", "n/a", "#n/a", "#nv", "null", "none", "-", "--", "---", "?", "*", "1.#qnan"}
_MISSING |= {"1.#ind", "-1.#ind", "missing"}
_BEYOND = {"ol", "over", "overload", "ovld", "ovfl", "overflow", "clip", "clipped", "1.#inf"}


@dataclass(frozen=True, slots=True)
class Fault:
    """A line that is no whole row of numbers.

    Parameters
    ----------
    line : int
        Its number in the file, from 0.
    row : int
        How many rows were read before it.
    kind : str
        "text" (no number in it: no row was made), "damaged" (a row of NaN stands for it) or "value"
        (the row is there, NaN where it could not be read).
    fields : int
        Number of its fields.
    text : str
        The line.
    """

    line: int
    row: int
    kind: str
    fields: int
    text: str


@dataclass(eq=False)
class LineReader:
    """Read lines of one layout, in stretches.

    Parameters
    ----------
    layout : TextLayout
        How the lines are laid out.
    line : int
        Number in the file of the next line, from 0.
    rows : int
        Rows read so far.
    faults : list of Fault
        Lines that were no rows, in order.
    keeps_parts : bool
        Whether a line of the right number of fields is a row though some of them are unreadable.
    """

    layout: TextLayout
    line: int = 0
    rows: int = 0
    faults: list[Fault] = field(default_factory=list)
    keeps_parts: bool = False

    def read(self, text: str) -> list[NDArray[np.float64]]:
        """Read a stretch of whole lines.

        Parameters
        ----------
        text : str
            Lines parted by line feeds.

        Returns
        -------
        list of ndarray, shape (n, columns)
            Blocks of rows, in order.
        """
        blocks: list[NDArray[np.float64]] = []
        self._read(self._tidy(text).split("\n"), blocks)
        return blocks

    def _tidy(self, text: str) -> str:
        """Return text that the C parser takes: decimal points, no quotes, no empty fields."""
        mark = self.layout.delimiter
        if self.layout.decimal == ",":
            text = text.replace(",", ".")
        if '"' in text:
            text = text.replace('"', "")
        if mark is None:
            return text
        text = f"\n{text}\n"
        if mark + mark in text or mark + "\n" in text or "\n" + mark in text:
            text = text.replace(mark + mark, f"{mark}nan{mark}").replace(
                mark + mark, f"{mark}nan{mark}"
            )
            text = text.replace(mark + "\n", f"{mark}nan\n").replace("\n" + mark, f"\nnan{mark}")
        return text[1:-1]

    def _read(self, lines: Sequence[str], blocks: list[NDArray[np.float64]]) -> None:
        values = self._maybe_parse(lines)
        if values is not None:
            blocks.append(values)
            self.rows += values.shape[0]
            self.line += len(lines)
        elif len(lines) <= _FEW:
            blocks.append(self._read_singly(lines))
        else:
            middle = len(lines) // 2
            self._read(lines[:middle], blocks)
            self._read(lines[middle:], blocks)

    def _maybe_parse(self, lines: Sequence[str]) -> NDArray[np.float64] | None:
        if not any(map(str.strip, lines)):
            return np.empty((0, self.layout.columns))
        try:
            values = np.loadtxt(lines, delimiter=self.layout.delimiter, comments=None, ndmin=2)
        except ValueError:
            return None
        return values if values.shape[1] == self.layout.columns else None

    def _read_singly(self, lines: Sequence[str]) -> NDArray[np.float64]:
        rows = []
        for line in lines:
            row = self._read_line(line)
            if row is not None:
                rows.append(row)
                self.rows += 1
            self.line += 1
        return np.array(rows, dtype=np.float64).reshape(len(rows), self.layout.columns)

    def _read_line(self, line: str) -> list[float] | None:
        if not line.strip():
            return None
        fields = split_fields(line, self.layout.delimiter)
        numbers = [_entry(text) for text in fields]
        if len(fields) == self.layout.columns and self._is_row(numbers):
            return [np.nan if number is None else number for number in numbers]
        if self.keeps_parts and len(fields) == self.layout.columns and self._is_most(numbers):
            self.faults.append(Fault(self.line, self.rows, "value", len(fields), line))
            return [np.nan if number is None else number for number in numbers]
        damaged = any(number is not None for number in numbers) or _is_mostly_digits(line)
        kind = "damaged" if damaged else "text"
        self.faults.append(Fault(self.line, self.rows, kind, len(fields), line))
        return [np.nan] * self.layout.columns if damaged else None

    def _is_row(self, numbers: Sequence[float | None]) -> bool:
        return all(numbers[i] is not None for i in self.layout.filled)

    def _is_most(self, numbers: Sequence[float | None]) -> bool:
        there = sum(numbers[i] is not None for i in self.layout.filled)
        return 2 * there >= len(self.layout.filled)


def _is_mostly_digits(line: str) -> bool:
    return 2 * sum(map(str.isdecimal, line)) > len(line.strip())


def _entry(text: str) -> float | None:
    """Return the number of a field; NaN or infinity for words that stand for them."""
    number = maybe_number(text)
    if number is not None:
        return number
    word = text.lower()
    if word in _MISSING:
        return float("nan")
    return float("inf") if word.lstrip("+->") in _BEYOND else None
