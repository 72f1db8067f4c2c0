"""The lines over the last minutes: one fit for every few seconds of samples."""

from collections import deque
from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from calibration.errors import CalibrationError
from calibration.line_fit import Line, LineFit
from calibration.lines import fit_lines_si

__all__ = ["LineBlock", "LinePoint", "LineWatch", "fit_block"]

FloatArray = NDArray[np.float64]

_FEWEST_CYCLES = 8  # of the lowest line in a block, and as many between two neighbours
_LONGEST_BLOCK_S = 60.0
_POINTS = 150  # of each line: ten minutes of four-second blocks


@dataclass(frozen=True, eq=False, slots=True)
class LineBlock:
    """Samples to be fitted.

    Parameters
    ----------
    start_index : int
        Index of the first sample.
    response : ndarray, shape (n,)
        Photodiode, NaN where missing or over-range.
    drive : ndarray, shape (n,), optional
        The drive, where it is recorded.
    rate_hz : float
        Samples per second.
    frequencies_hz : tuple of float
        The lines.
    mains_hz : float
        Mains frequency [Hz].
    units : tuple of str
        Of response and drive.
    """

    start_index: int
    response: FloatArray
    drive: FloatArray | None
    rate_hz: float
    frequencies_hz: tuple[float, ...]
    mains_hz: float
    units: tuple[str, str]


@dataclass(frozen=True, slots=True)
class LinePoint:
    """One line in one block.

    Parameters
    ----------
    time_s : float
        Middle of the block [s] from the stream's sample 0.
    amplitude, amplitude_u95 : float
        Zero to peak, and its expanded uncertainty (95 %), in the channel's unit.
    phase_rad, phase_u95_rad : float
        Of response/drive where the drive holds the line, else of A·cos(2πft + φ) with t = 0 at the
        stream's sample 0; and its expanded uncertainty (95 %).
    ratio : float or None
        Size of response/drive, where the drive holds the line.
    reasons : tuple of str
        Why not to believe it.
    """

    time_s: float
    amplitude: float
    amplitude_u95: float
    phase_rad: float
    phase_u95_rad: float
    ratio: float | None = None
    reasons: tuple[str, ...] = ()


def fit_block(block: LineBlock) -> LineFit | None:
    """Fit the lines in a block.

    Parameters
    ----------
    block : LineBlock
        Its samples.

    Returns
    -------
    LineFit or None
        Phases at the block's first sample; None where too little is there to fit.
    """
    drive = block.drive
    if drive is not None and not np.nanstd(drive) > 0:
        drive = None
    try:
        return fit_lines_si(
            block.response,
            block.rate_hz,
            block.frequencies_hz,
            drive,
            mains_hz=block.mains_hz,
            value_unit=block.units[0],
            drive_unit=block.units[1],
        )
    except (CalibrationError, np.linalg.LinAlgError):
        return None


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
        """Why a line that was asked for is not fitted."""
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

    def take(self, block: LineBlock, fit: LineFit | None) -> None:
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
        self.clock = None if offset is None else (fit.clock_value, _u95(offset))
        for frequency_hz, line in zip(block.frequencies_hz, fit.lines, strict=True):
            self._points[frequency_hz].append(_point(block, frequency_hz, line))

    def points(self, frequency_hz: float) -> tuple[LinePoint, ...]:
        """Return what is known of one line, oldest first."""
        return tuple(self._points.get(frequency_hz, ()))


def _point(block: LineBlock, frequency_hz: float, line: Line) -> LinePoint:
    time_s = (block.start_index + 0.5 * block.response.size) / block.rate_hz
    held = line.drive is not None and abs(line.drive.phasor) > 5.0 * line.drive.along_u
    ratio = line.ratio if held and line.ratio is not None else None
    phase = ratio.phase if ratio is not None else line.phase
    turns = 0.0 if ratio is not None else _turns(frequency_hz, block.start_index, block.rate_hz)
    angle = float(phase.magnitude) - 2 * np.pi * turns
    return LinePoint(
        time_s,
        abs(line.phasor),
        _u95(line.amplitude),
        float(np.angle(np.exp(1j * angle))),
        min(_u95(phase), np.pi),
        None if ratio is None else abs(ratio.phasor),
        line.distrust_reasons,
    )


def _turns(frequency_hz: float, start_index: int, rate_hz: float) -> float:
    """Return the fraction of a turn at a sample, exact to 1e-6 for days of samples."""
    whole, part = divmod(start_index / rate_hz, 1.0)
    return (whole * (frequency_hz % 1.0) + part * frequency_hz) % 1.0


def _u95(measured: object) -> float:
    return float(measured.expanded(0.95).magnitude)  # type: ignore[attr-defined]  # a Measured
