"""The fields of a line of text, and the numbers in them."""

import csv
import re

__all__ = ["maybe_number", "split_fields"]

_NUMBER = re.compile(r"[+-]?(\d+\.?\d*|\.\d+)([eE][+-]?\d+)?")
_COMMA_NUMBER = re.compile(r"[+-]?\d*(,\d+)?([eE][+-]?\d+)?")
_NOT_FINITE = re.compile(r"[+-]?(nan|inf|infinity)", re.IGNORECASE | re.ASCII)


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
    if decimal == "," and ("," in field or "." in field):
        if "." in field or not _COMMA_NUMBER.fullmatch(field):
            return None
        field = field.replace(",", ".")
    if _NUMBER.fullmatch(field) or _NOT_FINITE.fullmatch(field):
        return float(field)
    return None
