"""Rows without values: gaps, and over-range values that the file only counts."""

from collections.abc import Sequence
from dataclasses import replace

import numpy as np
from numpy.typing import NDArray

from firmware_bridge.gap import Gap
from firmware_bridge.stamps import Grid
from firmware_bridge.table import Table

__all__ = ["with_missing"]


def with_missing(table: Table, positions: Sequence[int], grid: Grid) -> Table:
    """Complete the gaps of the grid, and mark over-range values where the file counts them.

    Parameters
    ----------
    table : Table
        What the file holds.
    positions : sequence of int
        Which of its columns are channels.
    grid : Grid
        Where its rows lie; its gaps are completed.

    Returns
    -------
    Table
        The same, over-range values infinite.
    """
    columns = [table.columns[k] for k in positions]
    if table.gaps is None:
        grid.gaps = _gaps_with_empty_rows(columns, grid)
        return table
    grid.gaps = [Gap(start, length, u == 0, u) for start, length, u in table.gaps]
    inside = np.zeros(table.rows, dtype=bool)
    for gap in grid.gaps:
        inside[gap.index : gap.index + gap.length] = True
    beyond = [np.isnan(column) & ~inside for column in columns]
    # The file gives the number only: they are told from missing values where the numbers agree.
    if not table.over_range or sum(map(np.count_nonzero, beyond)) != table.over_range:
        return table
    marked = list(table.columns)
    for k, where in zip(positions, beyond, strict=True):
        marked[k] = np.where(where, np.inf, marked[k])
    return replace(table, columns=marked)


def _gaps_with_empty_rows(columns: Sequence[NDArray[np.float64]], grid: Grid) -> list[Gap]:
    """Return the gaps of the grid and the rows without any value, in order."""
    empty = np.ones(columns[0].size, dtype=bool)
    for column in columns:
        empty &= np.isnan(column)
    kept = ~empty[grid.rows]
    if kept.all() or not kept.any():
        return grid.gaps
    known = {(gap.index, gap.length): gap for gap in grid.gaps}
    full = np.concatenate(([-1], grid.index[kept], [grid.index[-1] + 1]))
    before = np.flatnonzero(np.diff(full) > 1)
    starts, lengths = full[before] + 1, np.diff(full)[before] - 1
    spans = list(zip(starts.tolist(), lengths.tolist(), strict=True))
    return [known.get(span) or Gap(*span) for span in spans]
