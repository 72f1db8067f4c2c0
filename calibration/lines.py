"""Lines: amplitude and phase of driven lines, with uncertainties that cover.

Lines are fitted jointly with a slow drift by least squares over block phasors, in noise made white by a
short filter; their u comes from the noise beside each, with its Student factor.
"""

from collections.abc import Callable, Sequence
from dataclasses import replace
from typing import TYPE_CHECKING, Any

import numpy as np
from numpy.typing import NDArray

from calibration.distrust import fringe_top_reason
from calibration.errors import CalibrationError
from calibration.line_fit import Line, LineFit
from calibration.line_product import LineProduct, combinations_of
from calibration.line_record import settle_lines
from calibration.line_source import ArraySource, LineSource

if TYPE_CHECKING:
    from metro.units import Quantity

__all__ = ["checked_frequencies", "fit_lines", "fit_lines_si", "fit_source", "plain_samples"]


def fit_lines(
    samples: "Quantity | NDArray[Any]",
    rate: "Quantity | str",
    frequencies: "Sequence[Quantity | str]",
    drive: "Quantity | NDArray[Any] | None" = None,
    *,
    free: bool = False,
    harmonics: int = 1,
    intermodulation: bool = False,
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
    harmonics : int
        Fit harmonics of each line too, up to this multiple; see ``LineFit.products``.
    intermodulation : bool
        Fit sums and differences of two lines too.

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
    where it is so large as by chance once in 500 000 recordings, 4.8 times its u or more.
    """
    from metro.units import si

    values, unit = plain_samples(samples)
    driven, drive_unit = (None, "1") if drive is None else plain_samples(drive)
    listed = [frequencies] if isinstance(frequencies, str) else list(frequencies)
    return fit_lines_si(
        values,
        si(rate, "rate", "Hz", above=0.0),
        [si(f, "frequencies", "Hz", above=0.0) for f in listed],
        driven,
        free=free,
        value_unit=unit,
        drive_unit=drive_unit,
        harmonics=harmonics,
        intermodulation=intermodulation,
    )


def plain_samples(samples: "Quantity | NDArray[Any]") -> tuple[NDArray[Any], str]:
    """Return samples as plain numbers in SI, and their unit.

    Parameters
    ----------
    samples : Quantity or ndarray, shape (n,)
        Bare numbers have the unit "1".

    Returns
    -------
    tuple of (ndarray, str)
        No copy where the unit is coherent already.
    """
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
    harmonics: int = 1,
    intermodulation: bool = False,
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
    harmonics : int
        Up to which multiple of each line harmonics are fitted too.
    intermodulation : bool
        Fit sums and differences of two lines too.

    Returns
    -------
    LineFit
        Lines in the order given.

    Raises
    ------
    CalibrationError
        If a frequency cannot be fitted at this rate, or too few samples are there.
    """
    source = ArraySource([values] if drive is None else [values, drive], rate_hz, start_index)
    return fit_source(
        source,
        frequencies_hz,
        free=free,
        mains_hz=mains_hz,
        units=(value_unit, drive_unit),
        search_clock=search_clock,
        harmonics=harmonics,
        intermodulation=intermodulation,
    )


def fit_source(
    source: LineSource,
    frequencies_hz: Sequence[float],
    *,
    free: bool = False,
    mains_hz: float = 50.0,
    units: tuple[str, str] = ("1", "1"),
    search_clock: bool = True,
    harmonics: int = 1,
    intermodulation: bool = False,
) -> LineFit:
    """Fit lines to a recording of any size.

    Parameters
    ----------
    source : LineSource
        Response and perhaps drive.
    frequencies_hz : sequence of float
        Lines [Hz], above 0 and below half the rate.
    free : bool
        Fit the frequency of each line too.
    mains_hz : float
        Frequency of the mains [Hz].
    units : tuple of str
        Coherent SI units of the samples and the drive.
    search_clock : bool
        Look for a common relative frequency error of all lines and follow it.
    harmonics : int
        Up to which multiple of each line harmonics are fitted too.
    intermodulation : bool
        Fit sums and differences of two lines too.

    Returns
    -------
    LineFit
        Lines in the order given.

    Raises
    ------
    CalibrationError
        If a frequency cannot be fitted at this rate, or too few samples are there.
    """
    frequencies = checked_frequencies(frequencies_hz, source.rate_hz)

    def fitted(lines_hz: NDArray[np.float64], order: int, *, is_free: bool) -> LineFit:
        sums = settle_lines(
            source, lines_hz, free=is_free, order=order, mains_hz=mains_hz, units=units
        )
        return sums.fit()

    order = 2 if search_clock else 0
    if not intermodulation and harmonics == 1:
        return fitted(frequencies, order, is_free=free)
    return _with_products(source, frequencies, fitted, order, free, (harmonics, intermodulation))


def _with_products(
    source: LineSource,
    frequencies: NDArray[np.float64],
    fitted: Callable[..., LineFit],
    order: int,
    free: bool,
    wanted: tuple[int, bool],
) -> LineFit:
    """Fit lines and what they make together at once; with free frequencies in a second fit."""
    first = fitted(frequencies, order, is_free=True) if free else None
    if first is not None:
        frequencies, order = np.array([line.frequency_hz for line in first.lines]), 0
    made = combinations_of(
        frequencies.tolist(),
        source.rate_hz,
        source.length / source.rate_hz,
        harmonics=wanted[0],
        intermodulation=wanted[1],
    )
    everything = np.concatenate([frequencies, [one.frequency_hz for one in made]])
    joint = fitted(everything, order, is_free=False)
    lines = joint.lines[: len(frequencies)]
    products = tuple(
        LineProduct(one.orders, tuple(x for m, x in zip(one.orders, lines, strict=True) if m), line)
        for one, line in zip(made, joint.lines[len(frequencies) :], strict=True)
    )
    if first is not None:
        return replace(first, products=products)
    lines = tuple(_beside_harmonic(line, k, products) for k, line in enumerate(lines))
    return replace(joint, lines=lines, products=products)


def _beside_harmonic(line: Line, number: int, products: tuple[LineProduct, ...]) -> Line:
    """Return a line, distrusted where its second harmonic is fitted too and is stronger."""
    for product in products:
        times = abs(product.line.phasor) / max(abs(line.phasor), np.finfo(float).tiny)
        if product.orders[number] == 2 and product.is_seen and times > 1:
            reason = fringe_top_reason(times, line.frequency_hz)
            return replace(line, distrust_reasons=(*line.distrust_reasons, reason))
    return line


def checked_frequencies(frequencies_hz: Sequence[float], rate_hz: float) -> NDArray[np.float64]:
    """Return the lines as an array.

    Parameters
    ----------
    frequencies_hz : sequence of float
        Lines [Hz].
    rate_hz : float
        Sampling rate [Hz].

    Returns
    -------
    ndarray, shape (n_lines,)
        The same.

    Raises
    ------
    CalibrationError
        If one lies outside, is named twice, or none is named.
    """
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
