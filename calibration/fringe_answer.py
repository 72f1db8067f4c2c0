"""An answer: what one way from a recording to metres gave, as document, tables and picture."""

from collections.abc import Callable, Sequence
from dataclasses import dataclass, replace
from functools import partial
from typing import Any

from calibration.errors import CalibrationError
from calibration.found_extremes import Level
from calibration.fringe_source import FringeSource
from firmware_bridge.trace import Recording

__all__ = ["FringeAnswer", "counted_answer", "driven_answer", "is_scan_without", "null_answer"]

_FRINGES_MIN = 2.0  # a pass: fewer are hardly a scan
_SEEN = 5.0  # standard uncertainties by which a line is seen


@dataclass(frozen=True)
class FringeAnswer:
    """What one way gave.

    Attributes
    ----------
    document : dict
        The JSON form.
    text : callable
        Gives the tables for people, with a sequence of remarks.
    reasons : sequence of str
        Why it must not be trusted; empty where nothing was found.
    in_metres : bool
        Whether a wavelength was known.
    draw : callable or None
        Draws it: path, and ``overwrite`` by name; None where there is no picture.
    """

    document: dict[str, Any]
    text: Callable[[Sequence[str]], str]
    reasons: Sequence[str]
    in_metres: bool
    draw: Callable[..., None] | None = None


def driven_answer(
    source: FringeSource, recording: Recording, lines_hz: Sequence[float]
) -> FringeAnswer:
    """Fit driven lines.

    Parameters
    ----------
    source : FringeSource
        What is known beside the record.
    recording : Recording
        With the lines.
    lines_hz : sequence of float
        Lines [Hz].

    Returns
    -------
    FringeAnswer
        Extremes, working point, depths, routes.
    """
    from calibration.driven_plot import save_driven_plot
    from calibration.fringe_reading import read_fringe
    from calibration.fringe_tables import driven_tables

    trace = source.trace(recording)
    low, high = source.extremes(trace.unit)
    result = read_fringe(
        trace,
        lines_hz,
        low=low,
        high=high,
        scan=source.scan(),
        whole=source.whole_of(recording),
        dark=source.dark_level(trace.unit),
        ruler=source.ruler(),
    )
    return FringeAnswer(
        result.to_dict(),
        partial(driven_tables, result),
        result.reasons,
        bool(result.fit.displacement_amplitude),
        partial(save_driven_plot, result, trace),
    )


def is_scan_without(source: FringeSource, recording: Recording, lines_hz: Sequence[float]) -> bool:
    """Return whether fringes pass in a record in which no line stands out.

    Parameters
    ----------
    source : FringeSource
        What is known beside the record.
    recording : Recording
        A scan, or lines about a working point.
    lines_hz : sequence of float
        Lines that the bench names [Hz].

    Returns
    -------
    bool
        True only where the fringes are counted without a reason for distrust and no line is seen.
    """
    import numpy as np

    from calibration.fringe_count import count_fringes
    from calibration.lines import fit_lines_si

    trace = source.trace(recording)
    try:
        count = count_fringes(trace.values, trace.rate_hz)
        if count.reasons or count.fringes < _FRINGES_MIN * len(count.passes):
            return False
        good = np.flatnonzero(np.isfinite(count.phase_rad))
        phase = np.interp(np.arange(len(count.phase_rad)), good, count.phase_rad[good])
        fit = fit_lines_si(phase, trace.rate_hz, lines_hz, search_clock=False)
    except CalibrationError:
        return False
    return all(line.snr_value < _SEEN for line in fit.lines)


def counted_answer(source: FringeSource, recording: Recording) -> FringeAnswer:
    """Count fringes.

    Parameters
    ----------
    source : FringeSource
        What is known beside the record.
    recording : Recording
        A scan, ramp or motor run.

    Returns
    -------
    FringeAnswer
        Extremes, fringes pass by pass, shape.
    """
    from calibration.count_plot import save_count_plot
    from calibration.count_reading import read_count
    from calibration.fringe_tables import count_tables

    trace = source.trace(recording)
    low, high = source.extremes(trace.unit)
    scan = source.scan()
    if scan is not None:
        low, high = Level(scan.low, scan.low_u), Level(scan.high, scan.high_u)
    drive = source.reading.drive(recording)
    if drive is not None:
        drive = replace(drive, values=drive.values * source.polarity())
    dark, ruler = source.dark_level(trace.unit), source.ruler()
    result = read_count(trace, drive, low=low, high=high, dark=dark, ruler=ruler)
    return FringeAnswer(
        result.to_dict(),
        partial(count_tables, result),
        result.reasons,
        ruler is not None,
        partial(save_count_plot, result),
    )


def null_answer(
    source: FringeSource, recordings: Sequence[Recording], lines_hz: Sequence[float]
) -> FringeAnswer:
    """Find the nulls of one line over a series of drives.

    Parameters
    ----------
    source : FringeSource
        What is known beside the records.
    recordings : sequence of Recording
        At different drives, with the drive's monitor.
    lines_hz : sequence of float
        One line [Hz].

    Returns
    -------
    FringeAnswer
        Nulls and the actuator's coefficient.

    Raises
    ------
    CalibrationError
        If there is not one line, or a record has no drive.
    """
    from calibration.null_reading import null_tables, read_nulls

    if len(lines_hz) != 1:
        raise CalibrationError(f"--null needs one --line, got {len(lines_hz)}")
    pairs = []
    for recording in recordings:
        drive = source.reading.drive(recording)
        if drive is None:
            raise CalibrationError("--null needs --drive, the column of the drive monitor")
        pairs.append((source.trace(recording), drive))
    result = read_nulls(pairs, lines_hz[0], ruler=source.ruler())
    text = partial(null_tables, result)
    return FringeAnswer(result.to_dict(), text, result.reasons, result.ruler is not None)
