"""Time stamps that a board prints with its lines: which column, in which unit, across wraps."""

from dataclasses import dataclass, replace

import numpy as np
from numpy.typing import NDArray

from firmware_bridge.column_name import time_unit_s
from firmware_bridge.table import Table
from firmware_bridge.time_column import maybe_find_time

__all__ = ["LiveStamps", "maybe_find_stamps"]

_UNITS = {1.0: "s", 1e-3: "ms", 1e-6: "µs", 1e-9: "ns"}
_LEAST_SPAN_S = 0.5  # of the host's clock: below it the arrival's jitter hides the unit
_RATE_TOLERANCE = 0.05  # clocks without a crystal are 1 % off, the first seconds tell 1 or 2 %
_ARRIVAL_S = 0.25  # how late a line may arrive after its stamp
_COUNTING = 0.95  # share of steps of exactly one in a column that counts lines
_NEUTRAL = {"", "n", "k", "i", "no", "nr", "index", "sample", "samples", "count", "counter", "#"}


@dataclass(frozen=True, slots=True)
class LiveStamps:
    """Where in a line the board's time stands.

    Parameters
    ----------
    positions : tuple of int
        Column of the stamp, or of whole seconds and of the microseconds beside them.
    unit_s : float
        Unit of the first of them [s]; 1 for a counter of lines.
    resolution_s : float
        Last printed digit [s].
    is_counter : bool
        True where the board counts its lines instead of giving a time.
    remark : str
        What was found, for people.
    """

    positions: tuple[int, ...]
    unit_s: float
    resolution_s: float
    is_counter: bool = False
    remark: str = ""

    def read(self, rows: NDArray[np.float64]) -> NDArray[np.float64]:
        """Return the stamps of rows of numbers.

        Parameters
        ----------
        rows : ndarray, shape (n, columns)
            All columns of the lines.

        Returns
        -------
        ndarray, shape (n,)
            In seconds, or in lines for a counter.
        """
        stamps: NDArray[np.float64] = rows[:, self.positions[0]] * self.unit_s
        return stamps + 1e-6 * rows[:, self.positions[1]] if len(self.positions) == 2 else stamps


def maybe_find_stamps(table: Table, arrivals_s: NDArray[np.float64]) -> LiveStamps | None:
    """Return where the board's time stands, judged by names and by the host's clock beside it.

    Parameters
    ----------
    table : Table
        The first lines.
    arrivals_s : ndarray, shape (n,)
        When each of them came, by the host's clock.

    Returns
    -------
    LiveStamps or None
        None where no column goes with the time, and where there is but one column.
    """
    if len(table.columns) < 2:
        return None
    pair = maybe_find_time(table, has_rate=True)
    if pair is not None and len(pair.positions) == 2:
        return LiveStamps(pair.positions, 1.0, pair.resolution_s, remark=pair.remarks[0])
    named = [
        (k, found)
        for k, (name, unit) in enumerate(zip(table.names, table.units, strict=True))
        if (found := time_unit_s(name, unit)) is not None
    ]
    others = [k for k in range(len(table.columns)) if k not in {k for k, _ in named}]
    for position in [*(k for k, _ in named), *others]:
        unit_s = _maybe_unit_s(table.columns[position], arrivals_s)
        if unit_s is not None:
            return _described(table, position, unit_s, "judged by the host's clock")
    for position, (unit_s, is_stated) in named:
        if is_stated:
            return _described(table, position, unit_s, "as its name says")
    return _maybe_counter(table)


def _described(table: Table, position: int, unit_s: float, why: str) -> LiveStamps:
    resolution_s = table.resolutions[position] * unit_s
    unit = _UNITS.get(unit_s, f"{unit_s:g} s")
    remark = f"time from column {position + 1}, in {unit} {why}"
    return LiveStamps((position,), unit_s, resolution_s, remark=remark)


def _maybe_unit_s(column: NDArray[np.float64], arrivals_s: NDArray[np.float64]) -> float | None:
    """Return the unit in which a column goes with the host's clock."""
    usable = np.isfinite(column)
    stamps, arrivals = column[usable], arrivals_s[usable] - arrivals_s[0]
    if stamps.size < 3 or arrivals[-1] - arrivals[0] < _LEAST_SPAN_S:
        return None
    span_s = arrivals[-1] - arrivals[0]
    if np.mean(np.diff(stamps) >= 0) < _COUNTING or stamps[-1] <= stamps[0]:
        return None
    tolerance = _RATE_TOLERANCE * span_s + _ARRIVAL_S
    for unit_s in _UNITS:
        apart_s = (stamps - stamps[0]) * unit_s - (arrivals - arrivals[0])
        is_near = abs(apart_s[-1]) < min(tolerance, 0.5 * span_s)
        if is_near and np.percentile(np.abs(apart_s), 90) < tolerance:
            return unit_s
    return None


def _maybe_counter(table: Table) -> LiveStamps | None:
    column = table.columns[0][np.isfinite(table.columns[0])]
    if column.size < 3 or table.names[0].lower() not in _NEUTRAL or (column % 1 != 0).any():
        return None
    steps = np.diff(column)
    if (steps < 1).any() or np.mean(steps == 1) < _COUNTING:
        return None
    found = LiveStamps((0,), 1.0, 1.0, is_counter=True)
    return replace(found, remark="column 1 counts the lines: it tells which are missing")
