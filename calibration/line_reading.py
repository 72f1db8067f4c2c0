"""Line reading: the lines of a trace of a recording, its over-range samples judged too."""

from collections.abc import Sequence
from dataclasses import replace
from typing import TYPE_CHECKING

from calibration.errors import CalibrationError
from calibration.line_fit import LineFit
from calibration.line_source import RecordingSource
from calibration.lines import fit_lines_si, fit_source
from calibration.sampling_times import with_timing

if TYPE_CHECKING:
    from firmware_bridge.trace import Recording, Trace

__all__ = ["read_lines", "read_recording_lines"]

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
    _check_named(frequencies_hz)
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
    traces = [trace for trace in (response, drive) if trace is not None]
    over_range = {trace.name: trace.over_range for trace in traces}
    return _judged(with_timing(fit, response.timing), over_range, len(response.values))


def read_recording_lines(
    recording: "Recording",
    names: Sequence[str],
    frequencies_hz: Sequence[float],
    *,
    from_s: float | None = None,
    to_s: float | None = None,
    free: bool = False,
    mains_hz: float = 50.0,
    harmonics: int = 1,
    intermodulation: bool = False,
) -> LineFit:
    """Fit the lines of a recording of any size, in bounded memory.

    Parameters
    ----------
    recording : Recording
        Opened.
    names : sequence of str
        The photodiode's channel, then perhaps that of the drive monitor.
    frequencies_hz : sequence of float
        The lines [Hz].
    from_s, to_s : float, optional
        The stretch [s], as :meth:`firmware_bridge.trace.Recording.trace` takes it.
    free : bool
        Fit the frequency of each too.
    mains_hz : float
        Frequency of the mains [Hz].
    harmonics : int
        Up to which multiple of each line harmonics are fitted too.
    intermodulation : bool
        Fit sums and differences of two lines too.

    Returns
    -------
    LineFit
        As of :func:`read_lines`, with the gaps of the stretch.

    Raises
    ------
    CalibrationError
        If no line is named, or one cannot be fitted.
    """
    _check_named(frequencies_hz)
    positions = [recording.find(name) for name in names]
    source = RecordingSource(recording, positions, from_s, to_s)
    channels = [recording.channels[position] for position in positions]
    units = (channels[0].unit, channels[-1].unit if len(channels) > 1 else "1")
    fit = fit_source(
        source,
        frequencies_hz,
        free=free,
        mains_hz=mains_hz,
        units=units,
        harmonics=harmonics,
        intermodulation=intermodulation,
    )
    over_range = {c.name: n for c, n in zip(channels, source.over_range, strict=True)}
    fit = _judged(with_timing(fit, recording.timing), over_range, source.length)
    return replace(fit, gaps=_gaps_within(recording, source.start, source.start + source.length))


def _check_named(frequencies_hz: Sequence[float]) -> None:
    if not frequencies_hz:
        raise CalibrationError("--line is needed: the frequency of each line, such as 1kHz")


def _judged(fit: LineFit, over_range: dict[str, int], samples: int) -> LineFit:
    """Return a fit distrusted where too many samples of a channel were over range."""
    reasons = [
        f"clipped: {number} samples of {name!r} were over range"
        for name, number in over_range.items()
        if number > _OVER_RANGE * samples
    ]
    if not reasons:
        return fit
    lines = (
        replace(line, distrust_reasons=(*line.distrust_reasons, *reasons)) for line in fit.lines
    )
    return replace(fit, lines=tuple(lines))


def _gaps_within(recording: "Recording", start: int, stop: int) -> tuple[int, ...]:
    """Return the lengths of the gaps in a stretch, what lies outside it cut off."""
    cut = (min(g.index + g.length, stop) - max(g.index, start) for g in recording.gaps)
    return tuple(length for length in cut if length > 0)
