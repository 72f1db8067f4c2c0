"""Tables to recordings: one column becomes the time, the others channels on a regular grid."""

from collections.abc import Sequence
from dataclasses import replace

import numpy as np
from numpy.typing import NDArray

from firmware_bridge.channel import Channel
from firmware_bridge.column_name import bare_name
from firmware_bridge.errors import BridgeError
from firmware_bridge.gap import Gap
from firmware_bridge.missing_rows import with_missing
from firmware_bridge.span import Span
from firmware_bridge.stamps import Grid, fit_grid
from firmware_bridge.table import Table
from firmware_bridge.time_column import TimeColumn, maybe_find_time, named_time
from firmware_bridge.timing import Timing
from firmware_bridge.trace import Recording
from firmware_bridge.unit_word import si_unit

__all__ = ["RateError", "TableRecording", "to_recording"]

_LOSS = 0.01  # of the rows; common practice: less is an accident, more is another measurement


class RateError(BridgeError):
    """A recording without a time column and without a rate."""


class TableRecording(Recording):
    """A recording from a table: its rows on a regular grid, what is between them missing.

    Parameters
    ----------
    path : str
        Where it came from.
    table : Table
        What the file holds.
    positions : sequence of int
        Which of its columns are channels.
    grid : Grid
        Where the rows lie.
    remarks : sequence of str
        What a reader should know.
    own_time : bool
        Whether ``from_s`` and ``to_s`` are the file's own stamps.
    reasons : sequence of str
        Why it must not be trusted as a whole.
    """

    def __init__(
        self,
        path: str,
        table: Table,
        positions: Sequence[int],
        grid: Grid,
        remarks: Sequence[str],
        own_time: bool = False,
        reasons: Sequence[str] = (),
    ) -> None:
        self._columns = [table.columns[k] for k in positions]
        self._grid = grid
        self._is_whole = grid.rows.size == table.rows and not grid.gaps
        self.start_s = grid.start_s
        rows = max(1, grid.rows.size)
        self._offset_s = grid.start_s if own_time else 0.0
        super().__init__(
            path=path,
            format=table.format,
            rate_hz=grid.rate_hz,
            rate_u_hz=grid.rate_u_hz,
            channels=[_channel(table, k) for k in positions],
            length=int(grid.index[-1]) + 1,
            gaps=grid.gaps,
            over_range=sum(int(np.isinf(column[grid.rows]).sum()) for column in self._columns),
            remarks=remarks,
            reasons=reasons,
            columns=[k + 1 for k in positions],
            timing=Timing(jitter_s=grid.jitter_s, jitter_u_s=grid.jitter_s / (2 * rows) ** 0.5),
        )

    def read(self, channels: Sequence[int], start: int, stop: int) -> Span:
        """Return samples ``start`` to ``stop`` (not included) of some channels.

        Parameters
        ----------
        channels : sequence of int
            Positions in ``self.channels``.
        start, stop : int
            Grid indices, 0 ≤ start ≤ stop ≤ length.

        Returns
        -------
        Span
            ``values`` of shape (stop − start, len(channels)).
        """
        values = np.full((len(channels), stop - start), np.nan)
        first, last = np.searchsorted(self._grid.index, (start, stop))
        over_range = 0
        for row, position in zip(values, channels, strict=True):
            column = self._stored(position, slice(first, last))
            beyond = np.isinf(column)
            over_range += int(np.count_nonzero(beyond))
            column = np.where(beyond, np.nan, column)
            channel = self.channels[position]
            row[self._grid.index[first:last] - start] = column * channel.scale + channel.offset
        return Span(values.T, over_range)

    def find(self, name: str) -> int:
        """Return the position in ``channels`` of a channel, also by its header as the file has it.

        Parameters
        ----------
        name : str
            As for `Recording.find`, or a header with its unit such as ``"pd (V)"``.

        Returns
        -------
        int
            Position in ``self.channels``.
        """
        return super().find(bare_name(name, [channel.name for channel in self.channels]))

    def _stored(self, position: int, part: slice) -> NDArray[np.float64]:
        column = self._columns[position]
        return column[part] if self._is_whole else column[self._grid.rows[part]]

    def span(self, from_s: float | None = None, to_s: float | None = None) -> tuple[int, int]:
        """Return the grid indices (start, stop) of the samples with ``from_s`` ≤ t < ``to_s``.

        Parameters
        ----------
        from_s, to_s : float, optional
            Times [s] from the first sample, or the file's own stamps where it was opened so.

        Returns
        -------
        tuple of (int, int)
            First sample and the one after the last.
        """
        moved = (None if t is None else t - self._offset_s for t in (from_s, to_s))
        return super().span(*moved)


def to_recording(
    table: Table,
    path: str,
    *,
    time: str | None = None,
    rate_hz: float | None = None,
    own_time: bool = False,
) -> TableRecording:
    """Return a table as a recording.

    Parameters
    ----------
    table : Table
        What the file holds.
    path : str
        Where it came from.
    time : str, optional
        The time column, by header or number; by default it is found out.
    rate_hz : float, optional
        Samples per second, for a table without a time column; beside one it takes precedence.
    own_time : bool
        Whether stretches are asked for in the file's own stamps.

    Returns
    -------
    TableRecording
        The channels on a regular grid.

    Raises
    ------
    BridgeError
        If there is no time column and no rate, or no channel beside the time.
    """
    has_rate = rate_hz is not None or table.rate_hz is not None
    found = named_time(table, time, path) if time else maybe_find_time(table, has_rate)
    remarks = [*(found.remarks if found else []), *table.remarks]
    grid = _grid(table, found, rate_hz, path, remarks)
    if not grid.index.size:
        raise RateError(f"{path} has no row of numbers")
    taken = found.positions if found else ()
    positions = [k for k in range(len(table.names)) if k not in taken]
    if not positions:
        raise RateError(f"{path} has a time column and no channel beside it")
    table = with_missing(table, positions, grid)
    remarks += _unit_remarks(table, positions)
    reasons = _losses(table, grid, has_stamps=found is not None)
    return TableRecording(path, table, positions, grid, remarks, own_time, reasons)


def _losses(table: Table, grid: Grid, *, has_stamps: bool) -> list[str]:
    """Return what is said of a file of which a large part could not be used."""
    total = table.rows + table.unread
    # A damaged row has no stamp either: with stamps it is not among the rows of the grid.
    left = total - grid.rows.size + (0 if has_stamps else table.damaged)
    if left <= _LOSS * total:
        return []
    return [f"{left} of {total} rows of the file are left out ({100 * left / total:.3g} %)"]


def _rising(table: Table) -> str:
    """Return a hint at the first column that rises throughout, as unnamed and uneven stamps do."""
    for number, column in enumerate(table.columns, start=1):
        steps = np.diff(column[np.isfinite(column)])
        if len(steps) > 2 and np.mean(steps >= 0.0) > 0.99 and np.any(steps > 0.0):
            return f" ({number} rises throughout)"
    return ""


def _grid(
    table: Table, found: TimeColumn | None, rate_hz: float | None, path: str, remarks: list[str]
) -> Grid:
    """Return the grid from the stamps, else from the rate given, else from the file's own."""
    if found is not None and not found.is_counter:
        grid = fit_grid(found.stamps_s, found.resolution_s, path)
        remarks += grid.remarks
        return _with_rate(table, grid, rate_hz, remarks)
    if rate_hz is None and table.rate_hz is not None:
        rate_hz = table.rate_hz
        remarks.append(f"rate {rate_hz:.10g} Hz as the file states it")
    if rate_hz is None:
        what = "the first column counts samples" if found else "it has no time column"
        rising = "" if found else _rising(table)
        raise RateError(
            f"{path}: {what}; give --rate, or --time and one of its columns{rising}: {_names(table)}"
        )
    if found is not None:
        grid = fit_grid(found.stamps_s, 0.0, path)
        remarks += grid.remarks
        gaps = [Gap(gap.index, gap.length) for gap in grid.gaps]
        start_s = grid.start_s / rate_hz
        return Grid(rate_hz, table.rate_u_hz or 0.0, grid.rows, grid.index, start_s, gaps=gaps)
    rows = np.arange(table.rows)
    return Grid(rate_hz, table.rate_u_hz or 0.0, rows, rows, 0.0)


def _with_rate(table: Table, grid: Grid, rate_hz: float | None, remarks: list[str]) -> Grid:
    """Return the grid with the rate given, or the file's, in place of what the stamps say."""
    stated = table.rate_hz if rate_hz is None else rate_hz
    if stated is None:
        return grid
    agrees = abs(stated - grid.rate_hz) <= max(3 * grid.rate_u_hz, 1e-9 * stated)
    if rate_hz is None and not agrees:
        remarks.append(
            f"the file states {stated:.10g} Hz; its time stamps say {grid.rate_hz:.10g} Hz, used here"
        )
        return grid
    if not agrees:
        remarks.append(
            f"the rate given, {stated:.10g} Hz, is used; the time stamps say {grid.rate_hz:.10g} Hz"
        )
    u = 0.0 if rate_hz is not None else table.rate_u_hz or 0.0
    return replace(grid, rate_hz=stated, rate_u_hz=u)


def _channel(table: Table, position: int) -> Channel:
    unit, factor, offset = si_unit(table.units[position]) or ("1", 1.0, 0.0)
    return Channel(table.names[position] or f"column {position + 1}", unit, factor, offset)


def _unit_remarks(table: Table, positions: Sequence[int]) -> list[str]:
    return [
        f"column {k + 1} has the unknown unit {table.units[k]!r}: taken as a pure number"
        for k in positions
        if si_unit(table.units[k]) is None
    ]


def _names(table: Table) -> str:
    return ", ".join(f"{k} {text!r}" if text else str(k) for k, text in enumerate(table.names, 1))
