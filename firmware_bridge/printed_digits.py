"""The last digits that numbers are printed with."""

import math
import re
from collections.abc import Sequence

from firmware_bridge.text_fields import split_fields
from firmware_bridge.text_layout import TextLayout

__all__ = ["finest_digits"]

_PRINTED = re.compile(r"[+-]?\d*[.,]?(?P<decimals>\d*)(?:[eE](?P<exponent>[+-]?\d{1,3}))?")


def finest_digits(lines: Sequence[str], layout: TextLayout) -> list[float]:
    """Return the finest last digit of each column.

    Parameters
    ----------
    lines : sequence of str
        Lines of data; those of another number of fields are left out.
    layout : TextLayout
        How they are laid out.

    Returns
    -------
    list of float
        Such as 0.001 for three decimals and 1 for whole numbers; 0 where nothing is printed.
    """
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
