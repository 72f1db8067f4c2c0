"""The lines over the last minutes: one fit for every few seconds of samples."""

from collections import deque
from collections.abc import Sequence
from typing import TYPE_CHECKING

import numpy as np
from numpy.typing import NDArray

from calibration.desk.watch.line_block import LineBlock, LinePoint, expanded_95, point_of

if TYPE_CHECKING:
    from calibration.line_fit import LineFit

__all__ = ["LineWatch"]

FloatArray = NDArray[np.float64]

_FEWEST_CYCLES = 8  # of the lowest line in a block, and as many between two neighbours
_LONGEST_BLOCK_S = 60.0
_LONG = 1.5  # times the block asked for: to be told
_POINTS = 150  # of each line: ten minutes of four-second blocks


class LineWatch:
    """Cut the stream into blocks for the fit, and keep what the fits found.

    Parameters
    ----------
    rate_hz : float
        Samples per second.
    block_s : float
        Length of a block [s]; longer where the lines need it.
    mains_hz : float
        Mains frequency [Hz].
    units : tuple of str
        Of photodiode and drive.
    has_drive : bool
        Whether the drive is recorded.
    """

    def __init__(
        self,
        rate_hz: float,
        block_s: float = 4.0,
        mains_hz: float = 50.0,
        units: tuple[str, str] = ("V", "V"),
        *,
        has_drive: bool = False,
    ) -> None:
        self._rate_hz, self._wanted_s = rate_hz, block_s
        self._mains_hz, self._units, self._has_drive = mains_hz, units, has_drive
        self.frequencies_hz: tuple[float, ...] = ()
        """The lines that are fitted."""
        self.clock: tuple[float, float] | None = None
        """Relative frequency error of all lines and its expanded uncertainty (95 %)."""
        self.remarks: tuple[str, ...] = ()
        """Why a line that was asked for is not fitted, or seldom."""
        self._points: dict[float, deque[LinePoint]] = {}
        self._quiet_until = 0
        self._reset()

    def set_lines(self, frequencies_hz: Sequence[float], settle_s: float = 0.0) -> None:
        """Fit other lines from now on.

        Parameters
        ----------
        frequencies_hz : sequence of float
            The lines [Hz]; those at or above half the rate cannot be seen and are left out.
        settle_s : float
            Time left out first [s], while the drive moves to what it shall be.
        """
        half = 0.5 * self._rate_hz
        wanted = sorted({f for f in frequencies_hz if 0.0 < f < half})
        self.remarks = tuple(
            f"{f:g} Hz lies at or above half the rate, {half:g} Hz"
            for f in sorted(set(frequencies_hz))
            if f >= half
        )
        self.frequencies_hz = tuple(wanted)
        self._points = {f: self._points.get(f, deque(maxlen=_POINTS)) for f in wanted}
        self.clock = None
        self._quiet_until = self._next + round(settle_s * self._rate_hz)
        self._reset()
        block_s = self._length / self._rate_hz
        if wanted and block_s > _LONG * self._wanted_s:
            spacing = float(np.diff([0.0, *wanted]).min())
            close = f"lines are {spacing:.3g} Hz apart" if spacing < wanted[0] else "a line is slow"
            self.remarks += (f"{close}: each fit takes {block_s:.3g} s",)

    def restart(self) -> None:
        """Forget every point and every sample: another stream begins, with a phase of its own."""
        for points in self._points.values():
            points.clear()
        self.clock = None
        self._quiet_until = 0
        self._reset()

    def _reset(self) -> None:
        spacing = np.diff([0.0, *self.frequencies_hz])
        closest = float(spacing.min()) if spacing.size else np.inf
        needed_s = min(_FEWEST_CYCLES / closest, _LONGEST_BLOCK_S)
        self._length = max(64, round(max(self._wanted_s, needed_s) * self._rate_hz))
        columns = 2 if self._has_drive else 1
        self._held: FloatArray = np.full((columns, self._length), np.nan)
        self._start: int | None = None
        self._next = getattr(self, "_next", 0)

    def add(self, start_index: int, values: FloatArray) -> list[LineBlock]:
        """Take the next samples and return the blocks that are full now.

        Parameters
        ----------
        start_index : int
            Index of the first one.
        values : ndarray, shape (n,) or (n, 2)
            Photodiode, and the drive where it is recorded; NaN where missing or over-range.

        Returns
        -------
        list of LineBlock
            To be given to `fit_block`, and what it finds to `take`.
        """
        columns = values.reshape(values.shape[0], -1).T
        self._next = start_index + columns.shape[1]
        early = min(max(0, self._quiet_until - start_index), columns.shape[1])
        start_index, columns = start_index + early, columns[:, early:]
        done: list[LineBlock] = []
        while columns.shape[1] and self.frequencies_hz:
            if self._start is None or start_index >= self._start + self._length:
                done += self._finish()
                self._start = start_index
            place = start_index - self._start
            taken = min(columns.shape[1], self._length - place)
            self._held[:, place : place + taken] = columns[:, :taken]
            start_index, columns = start_index + taken, columns[:, taken:]
            if place + taken == self._length:
                done += self._finish()
        return done

    def _finish(self) -> list[LineBlock]:
        """Return the block that is held, if at least half of it is there, and begin anew."""
        start, held = self._start, self._held
        self._start = None
        if start is None:
            return []
        self._held = np.full_like(held, np.nan)
        if np.count_nonzero(np.isfinite(held[0])) < 0.5 * self._length:
            return []
        drive = held[1] if self._has_drive else None
        lines, mains = self.frequencies_hz, self._mains_hz
        return [LineBlock(start, held[0], drive, self._rate_hz, lines, mains, self._units)]

    def take(self, block: LineBlock, fit: "LineFit | None") -> None:
        """Keep what a fit found.

        Parameters
        ----------
        block : LineBlock
            What was fitted.
        fit : LineFit or None
            What `fit_block` returned; a fit of lines that have changed since is dropped.
        """
        if fit is None or block.frequencies_hz != self.frequencies_hz:
            return
        offset = fit.clock_offset
        self.clock = None if offset is None else (fit.clock_value, expanded_95(offset))
        for frequency_hz, line in zip(block.frequencies_hz, fit.lines, strict=True):
            self._points[frequency_hz].append(point_of(block, frequency_hz, line))

    def points(self, frequency_hz: float) -> tuple[LinePoint, ...]:
        """Return what is known of one line, oldest first."""
        return tuple(self._points.get(frequency_hz, ()))
