"""Some seconds of samples and the lines that a fit finds in them."""

from dataclasses import dataclass
from typing import TYPE_CHECKING

import numpy as np
from numpy.typing import NDArray

from calibration.errors import CalibrationError
from calibration.line_fit import Line, LineFit
from calibration.lines import fit_lines_si

if TYPE_CHECKING:
    from metro.measured import Measured

__all__ = ["LineBlock", "LinePoint", "expanded_95", "fit_block", "point_of"]

FloatArray = NDArray[np.float64]


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


def point_of(block: LineBlock, frequency_hz: float, line: Line) -> LinePoint:
    """Return what a fit says of one line, its phase counted from the stream's sample 0.

    Parameters
    ----------
    block : LineBlock
        What was fitted.
    frequency_hz : float
        The line as it was asked for [Hz].
    line : Line
        What was found.

    Returns
    -------
    LinePoint
        For the course of the line.
    """
    time_s = (block.start_index + 0.5 * block.response.size) / block.rate_hz
    held = line.drive is not None and abs(line.drive.phasor) > 5.0 * line.drive.along_u
    ratio = line.ratio if held and line.ratio is not None else None
    phase = ratio.phase if ratio is not None else line.phase
    turns = 0.0 if ratio is not None else _turns(frequency_hz, block.start_index, block.rate_hz)
    angle = float(phase.magnitude) - 2 * np.pi * turns
    return LinePoint(
        time_s,
        abs(line.phasor),
        expanded_95(line.amplitude),
        float(np.angle(np.exp(1j * angle))),
        min(expanded_95(phase), np.pi),
        None if ratio is None else abs(ratio.phasor),
        line.distrust_reasons,
    )


def _turns(frequency_hz: float, start_index: int, rate_hz: float) -> float:
    """Return the fraction of a turn at a sample, exact to 1e-6 for days of samples."""
    whole, part = divmod(start_index / rate_hz, 1.0)
    return (whole * (frequency_hz % 1.0) + part * frequency_hz) % 1.0


def expanded_95(measured: "Measured") -> float:
    """Return the expanded uncertainty (95 %) as a plain number in SI."""
    return float(measured.expanded(0.95).magnitude)
