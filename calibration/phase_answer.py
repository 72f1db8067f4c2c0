"""Answers from the phase at every sample: by two detectors in quadrature, or by a pilot line."""

from collections.abc import Sequence
from dataclasses import replace
from functools import partial

from calibration.errors import CalibrationError
from calibration.found_extremes import Level, usable_scan
from calibration.fringe_answer import FringeAnswer
from calibration.fringe_source import FringeSource
from firmware_bridge.trace import Recording

__all__ = ["quadrature_answer", "tracked_answer"]


def quadrature_answer(
    source: FringeSource, recording: Recording, columns: str, lines_hz: Sequence[float]
) -> FringeAnswer:
    """Read two detectors in quadrature.

    Parameters
    ----------
    source : FringeSource
        What is known beside the record.
    recording : Recording
        With both detectors.
    columns : str
        Their columns, such as "2,3".
    lines_hz : sequence of float
        Lines [Hz]; may be empty.

    Returns
    -------
    FringeAnswer
        Phase, ellipse, depths.

    Raises
    ------
    CalibrationError
        If there are not two columns, or levels are given that the ellipse tells itself.
    """
    from calibration.quadrature_plot import save_quadrature_plot
    from calibration.quadrature_reading import quadrature_tables, read_quadrature

    names = [name.strip() for name in columns.split(",")]
    if len(names) != 2 or not all(names):
        raise CalibrationError(f"--quadrature needs two columns, such as 2,3, got {columns!r}")
    if any(source.levels) or source.extremes_file or source.monitor or source.antiphase:
        raise CalibrationError(
            "--quadrature finds offsets and gains itself: leave out --low, --high, --extremes, "
            "--monitor and --antiphase"
        )
    span = source.reading.from_s, source.reading.to_s
    x, y = (recording.trace(name, *span) for name in names)
    result = read_quadrature(x, y, lines_hz, ruler=source.ruler())
    return FringeAnswer(
        result.to_dict(),
        partial(quadrature_tables, result),
        result.reasons,
        result.ruler is not None,
        partial(save_quadrature_plot, result, x, y),
    )


def tracked_answer(
    source: FringeSource, recording: Recording, pilot_hz: float, lines_hz: Sequence[float]
) -> FringeAnswer:
    """Track a free-running bench by a driven line.

    Parameters
    ----------
    source : FringeSource
        What is known beside the record.
    recording : Recording
        With the pilot line.
    pilot_hz : float
        The pilot [Hz].
    lines_hz : sequence of float
        Lines to fit in the phase [Hz].

    Returns
    -------
    FringeAnswer
        Phase, pilot, depths.

    Raises
    ------
    CalibrationError
        If only one of the extremes is given.
    """
    from calibration.tracked_reading import read_tracked, tracked_tables

    trace = source.trace(recording)
    low, high = source.extremes(trace.unit)
    scan, reasons = source.scan(), []
    if scan is None and low is None and high is None:
        scan = usable_scan(trace, recording.path)  # it runs over whole fringes itself
    if scan is not None:
        low, high = Level(scan.low, scan.low_u), Level(scan.high, scan.high_u)
        reasons = [f"extremes: {reason}" for reason in scan.reasons]
    if low is None or high is None:
        raise CalibrationError("low and high must be given together")
    result = read_tracked(
        trace,
        pilot_hz,
        list(lines_hz),
        low,
        high,
        drive=source.reading.drive(recording),
        polarity=source.polarity(),
        ruler=source.ruler(),
    )
    result = replace(result, reasons=[*reasons, *result.reasons])
    text = partial(tracked_tables, result)
    return FringeAnswer(result.to_dict(), text, result.reasons, result.ruler is not None)
