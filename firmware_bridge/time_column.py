"""Which column of a table is the time, and its stamps in seconds."""

from dataclasses import dataclass, field

import numpy as np
from numpy.typing import NDArray

from firmware_bridge.column_name import bare_name, time_unit_s
from firmware_bridge.errors import BridgeError
from firmware_bridge.table import Table

__all__ = ["TimeColumn", "TimeColumnError", "maybe_find_time", "named_time"]

_UNIX_S = (5e8, 5e9)  # seconds since 1970 from 1985 to 2128
_NEUTRAL = ("", "x", "x-axis", "n", "k", "i", "no", "nr", "index", "sample", "samples", "#")
_FEW = 3  # rows: fewer cannot look regular


class TimeColumnError(BridgeError):
    """A time column that the recording does not have."""


@dataclass(frozen=True, eq=False)
class TimeColumn:
    """Stamps of the rows of a table.

    Parameters
    ----------
    positions : tuple of int
        The columns they come from, from 0.
    stamps_s : ndarray, shape (n,)
        In seconds, or a running number of samples where ``is_counter``.
    resolution_s : float
        The last printed digit [s].
    is_counter : bool
        True where the column counts samples, so that a rate is needed beside it.
    remarks : list of str
        What was assumed.
    """

    positions: tuple[int, ...]
    stamps_s: NDArray[np.float64]
    resolution_s: float
    is_counter: bool = False
    remarks: list[str] = field(default_factory=list)


def named_time(table: Table, wanted: str, name: str) -> TimeColumn:
    """Return the time column that a name or number selects.

    Parameters
    ----------
    table : Table
        What the file holds.
    wanted : str
        Only digits: the column's number from 1; ``name:3``: the header "3"; else a header;
        ``A+B`` where B holds the microseconds to the seconds in A.
    name : str
        The recording, for messages.

    Returns
    -------
    TimeColumn
        Its stamps.

    Raises
    ------
    TimeColumnError
        If there is no such column; the message lists what there is.
    """
    parts = wanted.split("+")
    if len(parts) == 2 and wanted not in table.names:
        return _seconds_and_microseconds(table, *(_find(table, part, name) for part in parts))
    position = _find(table, wanted, name)
    unit = time_unit_s(table.names[position], table.units[position])
    factor, stated = unit or (1.0, False)
    return _one_column(table, position, factor, stated)


def _find(table: Table, wanted: str, name: str) -> int:
    if wanted.isascii() and wanted.isdigit():
        if 1 <= int(wanted) <= len(table.names):
            return int(wanted) - 1
        raise TimeColumnError(f"{name} has no column {wanted}; it has {_listed(table)}")
    header = bare_name(wanted.removeprefix("name:"), table.names)
    found = [k for k, text in enumerate(table.names) if text == header]
    if len(found) == 1:
        return found[0]
    what = "more than one column" if found else "no column"
    raise TimeColumnError(f"{name} has {what} named {header!r}; it has {_listed(table)}")


def _listed(table: Table) -> str:
    return ", ".join(f"{k} {text!r}" for k, text in enumerate(table.names, 1))


def maybe_find_time(
    table: Table, has_rate: bool = False
) -> TimeColumn | None:  # a fact of the table
    """Return the column that is the time by name, by unit, or by being regular and increasing.

    Parameters
    ----------
    table : Table
        What the file holds.
    has_rate : bool
        Whether a rate is known: then a regular column with a name of its own is a channel.

    Returns
    -------
    TimeColumn or None
        None where no column looks like one.
    """
    for position, (column, unit) in enumerate(zip(table.names, table.units, strict=True)):
        found = time_unit_s(column, unit)
        if found is not None:
            pair = _maybe_microseconds(table, position)
            return pair or _one_column(table, position, *found)
    for position in range(len(table.names) - 1):
        pair = _maybe_microseconds(table, position)
        if pair is not None:
            return pair
    if has_rate and table.names[0].lower() not in _NEUTRAL:
        return None
    return _maybe_regular(table)


def _one_column(table: Table, position: int, factor: float, stated: bool) -> TimeColumn:  # private
    remarks = []
    column = table.columns[position]
    present = column[~np.isnan(column)]
    known = float(np.median(present)) if factor == 1.0 and present.size else 0.0
    if not stated and not _UNIX_S[0] < known < _UNIX_S[1]:  # calendar stamps leave no doubt
        label = table.names[position]
        remarks.append(f"the time column {label!r} states no unit: taken as seconds")
    stamps = column * factor
    return TimeColumn((position,), stamps, table.resolutions[position] * factor, remarks=remarks)


def _maybe_microseconds(table: Table, position: int) -> TimeColumn | None:
    """Return seconds since 1970 and the microseconds in the column after them as one time."""
    if position + 1 >= len(table.columns):
        return None
    seconds, micros = (table.columns[k] for k in (position, position + 1))
    with np.errstate(invalid="ignore"):
        usual = (seconds > _UNIX_S[0]) & (seconds < _UNIX_S[1]) & (seconds % 1 == 0)
        usual &= (micros >= 0) & (micros < 1e6) & (micros % 1 == 0)
    if seconds.size < _FEW or np.mean(usual) < 0.9 or np.nanmax(micros) < 1000:
        return None
    return _seconds_and_microseconds(table, position, position + 1)


def _seconds_and_microseconds(table: Table, seconds: int, micros: int) -> TimeColumn:
    whole = table.columns[seconds]
    finite = whole[np.isfinite(whole)]
    # Less the first second, so that microseconds stay exact; own stamps add it again.
    origin = float(finite[0]) if finite.size else 0.0
    stamps = (whole - origin) + 1e-6 * table.columns[micros] + origin
    remark = f"time from column {seconds + 1} (seconds) and column {micros + 1} (microseconds)"
    return TimeColumn((seconds, micros), stamps, 1e-6, remarks=[remark])


def _maybe_regular(table: Table) -> TimeColumn | None:
    """Return the first column as time where it is regular and increasing and no other quantity."""
    stamps = table.columns[0]
    stamps = stamps[np.isfinite(stamps)]
    if len(table.names) == 1 or stamps.size < _FEW or table.units[0].strip(" -"):
        return None
    steps = np.diff(stamps)
    median = float(np.median(steps))
    regular = np.abs(steps - median) <= max(0.01 * median, 1.05 * table.resolutions[0])
    if not (median > 0 and np.mean(steps > 0) > 0.99 and np.mean(regular) > 0.9):
        return None
    whole = bool((stamps == np.rint(stamps)).all())
    if whole and median == 1:
        return TimeColumn((0,), table.columns[0], 1.0, is_counter=True)
    found = _one_column(table, 0, 1.0, stated=True)
    label = table.names[0] or "1"
    found.remarks.append(f"column {label!r} is regular and increasing: taken as time in seconds")
    return found
