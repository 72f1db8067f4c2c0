"""What the first lines of a text board tell: layout, channels, time stamps and rate."""

import math
from collections.abc import Sequence
from dataclasses import dataclass, replace

import numpy as np
from numpy.typing import NDArray

from firmware_bridge.announcement import ChannelInfo
from firmware_bridge.column_name import split_headers
from firmware_bridge.errors import BridgeError
from firmware_bridge.line_placer import LinePlacer
from firmware_bridge.live_stamps import LiveStamps, maybe_find_stamps
from firmware_bridge.printed_digits import finest_digits
from firmware_bridge.stamps import fit_grid
from firmware_bridge.table import Table
from firmware_bridge.text_layout import TextLayout, maybe_find_layout
from firmware_bridge.text_lines import LineReader
from firmware_bridge.text_table import columns_kept
from firmware_bridge.unit_word import si_unit

__all__ = ["TextOpening", "maybe_open_text"]

_HEAD_LINES = 1000
_INT32_MAX = 2**31 - 1
_DECIMALS_MAX = 300  # the power of ten stays a float
_NAME_BYTES = 255  # what an announcement has room for
_HEADROOM = 8  # by how much a signal may grow beyond the first lines
_PAUSE_S = 1.0  # by the host's clock alone: shorter pauses are taken for its buffers


@dataclass(frozen=True, eq=False)
class TextOpening:
    """How the lines of a board are to be read.

    Parameters
    ----------
    layout : TextLayout
        Of every line.
    positions : tuple of int
        Columns that are channels.
    stamps : LiveStamps or None
        Where the board's time stands.
    rate_hz, rate_u_hz : float
        Lines per second, from the first lines.
    factors : ndarray, shape (channels,)
        Counts are the numbers printed times this.
    channels : tuple of ChannelInfo
        As announced.
    scatter_s : float
        Rms scatter of the stamps [s].
    clock : str
        What the rate comes from: "stamps", "host" or "given".
    remarks : tuple of str
        What was found and assumed.
    """

    layout: TextLayout
    positions: tuple[int, ...]
    stamps: LiveStamps | None
    rate_hz: float
    rate_u_hz: float
    factors: NDArray[np.float64]
    channels: tuple[ChannelInfo, ...]
    scatter_s: float
    clock: str
    remarks: tuple[str, ...] = ()

    @property
    def clock_hz(self) -> int:
        """Ticks per second of the clock in the frames: fine enough for the stamps' last digit."""
        if self.stamps is None or self.stamps.is_counter or not self.stamps.resolution_s:
            return 1_000_000
        return round(
            10.0 ** min(9, max(0, math.ceil(-math.log10(self.stamps.resolution_s) - 0.01)))
        )

    def placer(self) -> LinePlacer:
        """Return what places the lines.

        Returns
        -------
        LinePlacer
            New.
        """
        step_u = self.rate_u_hz / self.rate_hz
        if self.stamps is not None:
            return LinePlacer(1 / self.rate_hz, step_u, self.scatter_s)
        least = max(3, math.ceil(_PAUSE_S * self.rate_hz))
        return LinePlacer(1 / self.rate_hz, step_u, 0.0, least, by_host=True)


def maybe_open_text(
    lines: Sequence[str], arrivals_s: Sequence[float], rate_hz: float | None = None
) -> TextOpening | None:
    """Find out how the lines of a board are to be read.

    Parameters
    ----------
    lines : sequence of str
        The first lines, whole ones.
    arrivals_s : sequence of float
        When each of them came, by the host's clock [s].
    rate_hz : float, optional
        Lines per second, where known.

    Returns
    -------
    TextOpening or None
        None where no line holds numbers.
    """
    layout = maybe_find_layout(lines[:_HEAD_LINES])
    if layout is None:
        return None
    table, rows = _table(layout, lines)
    came_s = np.asarray(arrivals_s)[rows]
    if not rows.size:
        return None
    # With a rate the lines' own counting is a better clock than their arrival.
    clock_s = came_s if rate_hz is None else np.arange(rows.size) / rate_hz
    stamps = maybe_find_stamps(table, clock_s)
    remarks = [stamps.remark] if stamps else []
    found = _rate(table, stamps, came_s, rate_hz, remarks)
    if found is None:
        return None
    stamps, rate, rate_u, scatter_s, clock = found
    taken = stamps.positions if stamps else ()
    kept = columns_kept(np.column_stack(table.columns), table.names)
    positions = tuple(k for k in kept if k not in taken)
    decimals = [_decimals(table, k) for k in positions]
    channels = tuple(_channel(table, k, d) for k, d in zip(positions, decimals, strict=True))
    return TextOpening(
        layout, positions, stamps, rate, rate_u, 10.0 ** np.array(decimals, float), channels,
        scatter_s, clock, tuple(remarks),
    )  # fmt: skip


def _table(layout: TextLayout, lines: Sequence[str]) -> tuple[Table, NDArray[np.int64]]:
    """Return the first lines as a table, and which line each of its rows was."""
    reader, blocks, rows = LineReader(layout), [], []
    for number, line in enumerate(lines[layout.first_line :], layout.first_line):
        count = len(reader.faults)
        values = np.concatenate([np.empty((0, layout.columns)), *reader.read(line)])
        if len(values) == 1 and len(reader.faults) == count:
            blocks.append(values)
            rows.append(number)
    values = np.concatenate([np.empty((0, layout.columns)), *blocks])
    header = layout.header or ("",) * layout.columns
    names, stated = split_headers(header)
    units = layout.units or stated
    table = Table(
        format="text",
        columns=list(values.T),
        names=names,
        units=units,
        resolutions=finest_digits([lines[k] for k in rows], layout),
    )
    return table, np.array(rows, np.int64)


def _rate(
    table: Table,
    stamps: LiveStamps | None,
    came_s: NDArray[np.float64],
    given_hz: float | None,
    remarks: list[str],
) -> tuple[LiveStamps | None, float, float, float, str] | None:
    """Return stamps, rate, its u, the stamps' scatter, and what tells the rate."""
    by_host = _arrival_rate(came_s)
    if stamps is not None and not stamps.is_counter:
        values = stamps.read(np.column_stack(table.columns))
        try:
            grid = fit_grid(values, stamps.resolution_s, "the time column")
        except BridgeError as error:
            remarks[:] = [f"{error}: it is not used"]
        else:
            if given_hz is not None and abs(given_hz / grid.rate_hz - 1) > 0.01:
                remarks.append(
                    f"the rate given, {given_hz:.6g} Hz, is not used: the board's time stamps say "
                    f"{grid.rate_hz:.6g} Hz"
                )
            return stamps, grid.rate_hz, grid.rate_u_hz, grid.scatter_s, "stamps"
        stamps = None
    if given_hz is None and by_host is None:
        return None
    if given_hz is not None:
        rate, u, clock = given_hz, 0.0, "given"
    else:
        assert by_host is not None  # noqa: S101  # returned above
        (rate, u), clock = by_host, "host"
    if stamps is not None:  # a counter: in seconds by the rate, so that all stamps are
        stamps = replace(stamps, unit_s=1 / rate, resolution_s=0.0)
    return stamps, rate, u, 0.0, clock


def _arrival_rate(came_s: NDArray[np.float64]) -> tuple[float, float] | None:
    # A read may bring several lines at once: count from the first to the last read.
    span_s = float(came_s[-1] - came_s[0])
    if span_s <= 0:
        return None
    rate_hz = float(f"{np.count_nonzero(came_s > came_s[0]) / span_s:.6g}")
    return rate_hz, rate_hz * 0.05 * math.sqrt(2 / 3) / span_s


def _decimals(table: Table, position: int) -> int:
    """Return how many decimals of a column are kept, so that it has room in 32 bits."""
    column = table.columns[position]
    finite = np.abs(column[np.isfinite(column)])
    largest = float(finite.max(initial=0.0)) or 1.0
    digit = table.resolutions[position] or 1.0
    printed = max(0, round(-math.log10(digit)))
    # Logarithms are subtracted, since the numbers may lie at either end of what a float holds.
    digits = math.log10(largest)
    room = math.floor(math.log10(_INT32_MAX) - digits)
    spare = math.floor(math.log10(_INT32_MAX / _HEADROOM) - digits)
    # Decimals are not given up for headroom where the numbers as printed just fit.
    return max(0, min(printed, room if printed <= room else spare, _DECIMALS_MAX))


def _channel(table: Table, position: int, decimals: int) -> ChannelInfo:
    unit, factor, offset = si_unit(table.units[position]) or ("1", 1.0, 0.0)
    name = table.names[position] or f"column {position + 1}"
    name = name.encode()[:_NAME_BYTES].decode(errors="ignore")
    return ChannelInfo(name, unit, factor / 10**decimals, offset)
