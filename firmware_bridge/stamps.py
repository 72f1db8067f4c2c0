"""Printed time stamps to a regular grid: rate, places of the samples, gaps."""

import math
from dataclasses import dataclass, field

import numpy as np
from numpy.typing import NDArray

from firmware_bridge.errors import BridgeError
from firmware_bridge.gap import Gap
from firmware_bridge.pleasing_rate import pleasing_rate_hz
from firmware_bridge.stamp_order import usable_rows, without_lags
from firmware_bridge.steady_rate import (
    fit_step,
    is_steady,
    maybe_exact_step_s,
    maybe_single_step_s,
)

__all__ = ["Grid", "StampsError", "fit_grid"]

_FEW_MOVE = 0.3  # of the stamps differ from the one before: the others were made by the same tick
_SHORT_GAP = 3  # steps: over longer gaps the grid is not taken to hold
_LONGEST = 2_000_000_000  # samples: a grid longer than that comes of a wrong stamp


class StampsError(BridgeError):
    """Time stamps that tell no rate."""


@dataclass(eq=False)
class Grid:
    """Where the rows of a table lie on a regular grid.

    Attributes
    ----------
    rate_hz, rate_u_hz : float
        Samples per second of the clock that made the stamps, and its standard uncertainty from
        their scatter and rounding; how wrong that clock is the stamps cannot tell.
    rows : ndarray, shape (n,)
        The rows used, in order.
    index : ndarray, shape (n,)
        The place of each on the grid, from 0, strictly increasing.
    start_s : float
        The stamp of the first sample.
    scatter_s, jitter_s : float
        Rms distance of the stamps from the grid [s], and what is left of it without their rounding.
    gaps : list of Gap
        Samples that the stamps tell of and the table does not hold.
    remarks : list of str
        What is odd about the stamps.
    """

    rate_hz: float
    rate_u_hz: float
    rows: NDArray[np.int64]
    index: NDArray[np.int64]
    start_s: float
    scatter_s: float = 0.0
    jitter_s: float = 0.0
    gaps: list[Gap] = field(default_factory=list)
    remarks: list[str] = field(default_factory=list)


def fit_grid(stamps_s: NDArray[np.float64], resolution_s: float, name: str) -> Grid:
    """Find the regular grid on which the stamps of a recording lie.

    Parameters
    ----------
    stamps_s : ndarray, shape (n,)
        Time stamps [s]; rows without a finite stamp are left out.
    resolution_s : float
        The last printed digit [s], 0 if not rounded.
    name : str
        The recording, for messages.

    Returns
    -------
    Grid
        The rate, the place of each row, and the gaps.

    Raises
    ------
    StampsError
        If fewer than two stamps increase, or they span no plausible grid.
    """
    remarks: list[str] = []
    rows = usable_rows(stamps_s, remarks)
    stamps = stamps_s[rows]
    if rows.size < 2 or stamps[-1] <= stamps[0]:
        raise StampsError(f"{name}: the time column must increase over at least two samples")
    if not 1e-15 < (stamps[-1] - stamps[0]) / rows.size < 1e15:
        raise StampsError(f"{name}: the time stamps must be between 1e-15 s and 1e15 s apart")
    # Rounding in the computer limits stamps too, such as seconds since 1970 with decimals.
    resolution_s = max(resolution_s, float(np.spacing(np.abs(stamps).max())), _tick_s(stamps))
    index, kept = _places(stamps, resolution_s, name, remarks)
    rows, stamps, index = rows[kept], stamps[kept], index[kept]
    return _grid(rows, stamps, index, resolution_s, remarks)


def _tick_s(stamps: NDArray[np.float64]) -> float:
    """Return the tick of a clock too slow for the samples, whatever digits it prints; else 0."""
    steps = np.diff(stamps)
    moved = steps[steps > 0.0]
    return float(np.median(moved)) if len(moved) < _FEW_MOVE * len(steps) else 0.0


def _places(
    stamps: NDArray[np.float64], resolution_s: float, name: str, remarks: list[str]
) -> tuple[NDArray[np.int64], NDArray[np.bool_]]:
    """Return the place of each stamp on the grid, and which rows are kept."""
    rows = np.arange(stamps.size)
    everything = np.ones(stamps.size, dtype=bool)
    steps = np.diff(stamps)
    exact_s = maybe_exact_step_s(steps, resolution_s)
    if exact_s is not None:
        return _cumulated(np.rint(steps / exact_s), name), everything
    if is_steady(stamps, rows, resolution_s):
        return rows, everything
    step_s = maybe_single_step_s(steps, resolution_s)
    if step_s is None:
        return _places_by_breaks(stamps, steps, resolution_s, name, remarks), everything
    counts = np.rint(steps / step_s)
    step_s = fit_step(stamps, _cumulated(counts, name), 0.0, counts > _SHORT_GAP).step_s
    return without_lags(_cumulated(np.rint(steps / step_s), name), step_s, remarks)


def _cumulated(counts: NDArray[np.float64], name: str) -> NDArray[np.int64]:
    if counts.sum() > _LONGEST:
        at = int(np.argmax(counts)) + 1
        raise StampsError(
            f"{name}: the time stamps leave {counts.max():.3g} samples missing after row {at}; a "
            f"recording may span at most {_LONGEST:.0e} samples"
        )
    return np.concatenate(([0], np.cumsum(counts))).astype(np.int64)


def _places_by_breaks(
    stamps: NDArray[np.float64],
    steps: NDArray[np.float64],
    resolution_s: float,
    name: str,
    remarks: list[str],
) -> NDArray[np.int64]:
    """Return places where stamps are too coarse or too uneven to tell single missing samples."""
    usual = float(np.percentile(steps, 99))
    broken = steps > max(2.5 * usual, 2.5 * resolution_s)
    rows = np.arange(stamps.size)
    step_s = fit_step(stamps, rows, resolution_s, broken).step_s
    # From line to line: a single rounded or late stamp beside a gap would be a second off.
    starts = np.concatenate(([0], np.flatnonzero(broken) + 1))
    sizes = np.diff(np.concatenate((starts, [rows.size])))
    offsets = np.add.reduceat(stamps - stamps[0] - step_s * rows, starts) / sizes
    counts = np.ones(steps.size)
    counts[broken] = np.maximum(1 + np.rint(np.diff(offsets) / step_s), 1)
    spread = f"from {steps.min():.3g} s to {steps[~broken].max():.3g} s apart"
    if resolution_s > 0.25 * step_s:
        remarks.append(
            f"the time stamps are rounded to {resolution_s:.3g} s, {resolution_s / step_s:.3g} samples: "
            "shorter gaps cannot be seen"
        )
    else:
        remarks.append(
            f"the time stamps are irregular ({spread}): the samples are taken as evenly spaced at "
            "the mean rate, and gaps of a few samples cannot be told from late stamps"
        )
    return _cumulated(counts, name)


def _grid(
    rows: NDArray[np.int64],
    stamps: NDArray[np.float64],
    index: NDArray[np.int64],
    resolution_s: float,
    remarks: list[str],
) -> Grid:
    steps = np.diff(index)
    fit = fit_step(stamps, index, resolution_s, steps > _SHORT_GAP)
    if fit.scatter_s > 0.2 * fit.step_s and fit.scatter_s > resolution_s:
        remarks.append(
            f"the time stamps scatter by {fit.scatter_s:.3g} s (rms) about a steady rate, "
            f"{fit.scatter_s / fit.step_s:.2g} of a sample"
        )
    rate_hz = pleasing_rate_hz(fit, stamps, index)
    # A long pause need not be a whole number of samples: what is left over is uncertain too.
    excess = np.abs(np.diff(stamps) / fit.step_s - steps) * (resolution_s < 0.25 * fit.step_s)
    scatter = np.maximum(excess, max(fit.scatter_s, resolution_s / math.sqrt(12)) / fit.step_s)
    gaps = _gaps(index, scatter, fit.step_u_s / fit.step_s)
    rate_u_hz = fit.step_u_s * rate_hz**2
    rounding_s = resolution_s / math.sqrt(12)
    jitter_s = 0.0 if fit.is_rounding else math.sqrt(max(0.0, fit.scatter_s**2 - rounding_s**2))
    places, start_s = index - index[0], float(stamps[0])
    return Grid(rate_hz, rate_u_hz, rows, places, start_s, fit.scatter_s, jitter_s, gaps, remarks)


def _gaps(index: NDArray[np.int64], scatter: NDArray[np.float64], step_u: float) -> list[Gap]:
    """Return the gaps; the length is uncertain by the stamps' scatter and by the rate."""
    before = np.flatnonzero(np.diff(index) > 1)
    first = index[before] + 1 - index[0]
    lengths = index[before + 1] - index[before] - 1
    uncertain = np.hypot(scatter[before], lengths * step_u)
    return [
        Gap(start, length, exact=False, length_u=u)
        for start, length, u in zip(
            first.tolist(), lengths.tolist(), uncertain.tolist(), strict=True
        )
    ]
