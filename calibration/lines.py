"""Lines: amplitude and phase of driven lines, with uncertainties that cover.

Lines are fitted jointly with a slow drift by least squares over block phasors, in noise made white by a
short filter; their u comes from the noise beside each, with its Student factor.
"""

from collections.abc import Sequence
from typing import TYPE_CHECKING, Any

import numpy as np
from numpy.typing import NDArray

from calibration.channel_fit import fit_channel
from calibration.clock import Followed
from calibration.distrust import TOO_WEAK, Doubts, is_clipped
from calibration.errors import CalibrationError
from calibration.line_fit import Line, LineFit
from calibration.line_record import Found, LineRecord
from calibration.line_result import FittedChannel, ratio_estimate
from calibration.phasors import BlockPhasors

if TYPE_CHECKING:
    from metro.units import Quantity

__all__ = ["fit_lines", "fit_lines_si"]

_FEWEST_SAMPLES = 16
_LARGE_OFFSET = 1e-3  # a crystal is a hundred times better


def fit_lines(
    samples: "Quantity | NDArray[Any]",
    rate: "Quantity | str",
    frequencies: "Sequence[Quantity | str]",
    drive: "Quantity | NDArray[Any] | None" = None,
    *,
    free: bool = False,
) -> LineFit:
    """Fit lines: amplitude, phase, noise beside each, ratio to the drive.

    Parameters
    ----------
    samples : Quantity or ndarray, shape (n,)
        Evenly spaced samples, NaN where missing; bare numbers have the unit "1".
    rate : Quantity or str
        Sampling rate, such as ``"4 kHz"``.
    frequencies : sequence of Quantity or str
        The lines, such as ``["31.7 Hz", "87.1 Hz"]``; above 0 and below half the rate.
    drive : Quantity or ndarray, shape (n,), optional
        The drive, sampled together with ``samples``.
    free : bool
        Fit the frequency of each line too.

    Returns
    -------
    LineFit
        Lines in the order given. A line is A·cos(2πft + φ), t = 0 at the first sample; u is standard
        uncertainty, with its degrees of freedom.

    Raises
    ------
    MetroError
        If a value lacks its unit.
    CalibrationError
        If a line lies at or above half the rate, or too few samples are given.

    Notes
    -----
    Least squares of all lines and a slow drift at once, in noise whitened by a short linear
    prediction. Without a fitted frequency the common error of all lines, the clock's, is followed
    where it is larger than four times its u.
    """
    from metro.units import si

    values, unit = _plain(samples)
    driven, drive_unit = (None, "1") if drive is None else _plain(drive)
    listed = [frequencies] if isinstance(frequencies, str) else list(frequencies)
    return fit_lines_si(
        values,
        si(rate, "rate", "Hz", above=0.0),
        [si(f, "frequencies", "Hz", above=0.0) for f in listed],
        driven,
        free=free,
        value_unit=unit,
        drive_unit=drive_unit,
    )


def _plain(samples: "Quantity | NDArray[Any]") -> tuple[NDArray[Any], str]:
    """Return samples in SI and their unit."""
    from metro.si_form import si_form

    if not hasattr(samples, "magnitude"):
        return np.asarray(samples), "1"
    unit, factor, offset = si_form(samples.units)  # type: ignore[union-attr]  # has a magnitude
    magnitude = np.asarray(samples.magnitude)
    return (magnitude if factor == 1 and offset == 0 else magnitude * factor + offset), unit


def fit_lines_si(
    values: NDArray[Any],
    rate_hz: float,
    frequencies_hz: Sequence[float],
    drive: NDArray[Any] | None = None,
    *,
    free: bool = False,
    start_index: int = 0,
    mains_hz: float = 50.0,
    value_unit: str = "1",
    drive_unit: str = "1",
    search_clock: bool = True,
) -> LineFit:
    """Fit lines to samples given as plain numbers.

    Parameters
    ----------
    values : ndarray, shape (n,)
        Samples of any real type, NaN where missing.
    rate_hz : float
        Sampling rate [Hz].
    frequencies_hz : sequence of float
        Lines [Hz], above 0 and below half the rate.
    drive : ndarray, shape (n,), optional
        The drive, sampled with ``values``.
    free : bool
        Fit the frequency of each line too.
    start_index : int
        Number of ``values[0]`` counted from the recording's first sample, where t = 0.
    mains_hz : float
        Frequency of the mains [Hz].
    value_unit, drive_unit : str
        Coherent SI units of the samples and the drive.
    search_clock : bool
        Look for a common relative frequency error of all lines and follow it.

    Returns
    -------
    LineFit
        Lines in the order given.

    Raises
    ------
    CalibrationError
        If a frequency cannot be fitted at this rate, or too few samples are there.
    """
    frequencies = _checked_frequencies(frequencies_hz, rate_hz)
    channels = _checked_channels(values, drive)
    record = LineRecord(channels, rate_hz, start_index)
    cycles = frequencies / rate_hz
    found = (
        record.free_lines(cycles)
        if free
        else record.given_lines(cycles, 2 if search_clock else 0, mains_hz / rate_hz)
    )
    fitted = [
        _fitted(phasors, found.followed, len(cycles), unit)
        for phasors, unit in zip(found.blocks, (value_unit, drive_unit), strict=False)
    ]
    doubts = Doubts(
        fitted[0].cycles * rate_hz,
        rate_hz,
        record.length / rate_hz,
        mains_hz,
        found.surveys,
        [is_clipped(channel) for channel in channels],
        [_largest(channel) for channel in channels],
    )
    lines = [_line(fitted, found, doubts, k, free=free) for k in range(len(cycles))]
    # Lines that are lost in noise say nothing about the clock.
    lost = all(any(r.startswith(TOO_WEAK) for r in line.distrust_reasons) for line in lines)
    clock, clock_u = (np.nan, np.nan) if free or lost else _clock(found)
    return LineFit(
        tuple(lines),
        clock,
        clock_u,
        found.followed.dof,
        bool(found.followed.kept.any()) and not free,
        float(found.blocks[0].present.sum()) / record.length,
        record.length / rate_hz,
        tuple(_remarks(found, len(cycles) * len(channels))),
    )


def _checked_frequencies(frequencies_hz: Sequence[float], rate_hz: float) -> NDArray[np.float64]:
    frequencies = np.atleast_1d(np.asarray(frequencies_hz, dtype=np.float64))
    if not rate_hz > 0:
        raise CalibrationError(f"rate must be > 0 Hz, got {rate_hz:g} Hz")
    if not len(frequencies):
        raise CalibrationError("at least one line must be named")
    for f in frequencies:
        if not 0 < f < 0.5 * rate_hz:
            raise CalibrationError(
                f"a line must lie above 0 Hz and below half the sampling rate, {0.5 * rate_hz:g} Hz, got {f:g} Hz"
            )
    if len(np.unique(frequencies)) < len(frequencies):
        raise CalibrationError(
            f"each line must be named once, got {', '.join(f'{f:g} Hz' for f in frequencies)}"
        )
    return frequencies


def _checked_channels(values: NDArray[Any], drive: NDArray[Any] | None) -> list[NDArray[Any]]:
    channels = [np.asarray(values)] + ([] if drive is None else [np.asarray(drive)])
    for name, channel in zip(("samples", "drive"), channels, strict=False):
        if channel.ndim != 1:
            raise CalibrationError(f"{name} must have shape (n,), got {channel.shape}")
        if len(channel) != len(channels[0]):
            raise CalibrationError(
                f"drive must have {len(channels[0])} samples like the response, got {len(channel)}"
            )
        if len(channel) < _FEWEST_SAMPLES:
            raise CalibrationError(
                f"{name} must have at least {_FEWEST_SAMPLES} values, got {len(channel)}"
            )
        if not np.isfinite(channel[-_FEWEST_SAMPLES:]).all() and not np.isfinite(channel).any():
            raise CalibrationError(f"{name}: no value is there, all are NaN")
    return channels


def _largest(channel: NDArray[Any]) -> float:
    """Return the largest absolute value of some thousand samples."""
    looked = np.abs(channel[:: max(1, len(channel) // 4096)].astype(np.float64))
    return float(looked.max(initial=0.0, where=np.isfinite(looked)))


def _fitted(phasors: BlockPhasors, followed: Followed, lines: int, unit: str) -> FittedChannel:
    fit = fit_channel(phasors, lines, followed.applied, refine=False)
    functions = followed.course.at(phasors.middles)
    mean = (functions * phasors.counts[:, None]).sum(axis=1) / max(1, phasors.used)
    return FittedChannel(fit, followed, phasors.cycles[:lines], phasors.taps, unit, mean)


def _line(fitted: list[FittedChannel], found: Found, doubts: Doubts, k: int, *, free: bool) -> Line:
    response, rate_hz = fitted[0], doubts.rate_hz
    frequency_u = float(np.sqrt(max(0.0, found.followed.covariance[k, k]))) if free else 0.0
    return Line(
        float(response.cycles[k] / (1 + found.offset) * rate_hz),
        frequency_u,
        response.estimate(k),
        response.density(k, rate_hz),
        response.fit.used / rate_hz,
        fitted[1].estimate(k) if len(fitted) > 1 else None,
        ratio_estimate(response, fitted[1], k) if len(fitted) > 1 else None,
        doubts.reasons(fitted, k),
    )


def _remarks(found: Found, seen: int) -> list[str]:
    remarks = []
    if abs(found.offset) > _LARGE_OFFSET:
        remarks.append(
            f"the lines were followed {100 * found.offset:+.2g} % from where they were named"
        )
        if seen == 1:
            remarks.append("one line alone cannot tell a clock that is off from another tone")
    if any(len(phasors.taps) > 1 for phasors in found.blocks):
        remarks.append("the noise is not white: samples and lines went through one short filter")
    return remarks


def _clock(found: Found) -> tuple[float, float]:
    """Return the mean relative frequency offset and its u."""
    followed = found.followed
    # P_d(1) − P_d(−1) is 2 for odd degrees and 0 for even ones.
    odd = np.array([degree % 2 for degree in followed.course.degrees], dtype=np.float64)
    if not len(odd):
        return float("nan"), float("nan")
    left = float(odd @ followed.course.theta)
    u = float(np.sqrt(odd @ followed.covariance @ odd))
    return (1 + found.offset) * (1 + left) - 1, (1 + found.offset) * u
