"""Line reading: the lines of a trace of a recording, its over-range samples judged too."""

from collections.abc import Sequence
from dataclasses import replace
from typing import TYPE_CHECKING

from calibration.errors import CalibrationError
from calibration.line_fit import LineFit
from calibration.lines import fit_lines_si
from calibration.sampling_times import with_timing

if TYPE_CHECKING:
    from firmware_bridge.trace import Trace

__all__ = ["read_lines"]

_OVER_RANGE = 1e-4  # of the samples: what is cut off there would have been the largest


def read_lines(
    response: "Trace",
    drive: "Trace | None",
    frequencies_hz: Sequence[float],
    *,
    free: bool = False,
    mains_hz: float = 50.0,
) -> LineFit:
    """Fit the lines of a trace.

    Parameters
    ----------
    response : Trace
        The photodiode.
    drive : Trace, optional
        The drive monitor, over the same stretch.
    frequencies_hz : sequence of float
        The lines [Hz].
    free : bool
        Fit the frequency of each too.
    mains_hz : float
        Frequency of the mains [Hz].

    Returns
    -------
    LineFit
        Distrusted where too many samples were over range; what the jitter of the board's stamps took
        is put back, and phases are refused where the host's clock alone tells the times.

    Raises
    ------
    CalibrationError
        If no line is named, or one cannot be fitted.
    """
    if not frequencies_hz:
        raise CalibrationError("--line is needed: the frequency of each line, such as 1kHz")
    fit = fit_lines_si(
        response.values,
        response.rate_hz,
        frequencies_hz,
        None if drive is None else drive.values,
        free=free,
        start_index=response.start_index,
        mains_hz=mains_hz,
        value_unit=response.unit,
        drive_unit="1" if drive is None else drive.unit,
    )
    fit = with_timing(fit, response.timing)
    reasons = [
        f"clipped: {trace.over_range} samples of {trace.name!r} were over range"
        for trace in (response, drive)
        if trace is not None and trace.over_range > _OVER_RANGE * len(trace.values)
    ]
    if not reasons:
        return fit
    lines = (
        replace(line, distrust_reasons=(*line.distrust_reasons, *reasons)) for line in fit.lines
    )
    return replace(fit, lines=tuple(lines))
