"""The driven fringe: metres from a mirror driven at known frequencies, on one photodiode.

The sine approximation of ISO 16063-11 (method 3) carried over to a single photodiode: all driven
lines, the slow drift of the working point and, where the record allows, the fringe's extremes are
fitted at once to V = (high+low)/2 + (high−low)/2·cos(φ(t) + Σ m_i cos(2πf_i t + ψ_i)).
"""

import math
from collections.abc import Sequence
from dataclasses import replace
from typing import TYPE_CHECKING, Any, cast

import numpy as np
from numpy.typing import NDArray

from calibration.comb_stretch import likely_stretches
from calibration.descent import Prior
from calibration.fringe_finish import finish
from calibration.fringe_fit import FringeFit
from calibration.fringe_input import checked_prior, checked_turns, checked_values
from calibration.fringe_reasons import fringe_reasons
from calibration.fringe_result import depths_of, fringe_result
from calibration.fringe_search import Found, search
from calibration.fringe_start import find_starts
from calibration.ruler import Ruler, ruler_of

if TYPE_CHECKING:
    from metro.measured import Measured
    from metro.units import Quantity

__all__ = ["fit_driven_fringe", "fit_driven_fringe_si"]


def fit_driven_fringe_si(
    values: NDArray[np.float64],
    rate_hz: float,
    frequencies_hz: Sequence[float],
    *,
    low: float | None = None,
    high: float | None = None,
    low_u: float = 0.0,
    high_u: float = 0.0,
    start_index: int = 0,
    value_unit: str = "1",
    ruler: Ruler | None = None,
    dark: float | None = None,
    dark_u: float = 0.0,
) -> FringeFit:
    """Fit a driven fringe, on floats.

    Parameters
    ----------
    values : ndarray, shape (n,)
        Photodiode record, volts or counts; NaN where samples are missing.
    rate_hz : float
        Sample rate [Hz].
    frequencies_hz : sequence of float
        Lines [Hz].
    low, high : float, optional
        Extremes of the fringe where known, in the record's unit; both or neither.
    low_u, high_u : float, optional
        Their standard uncertainties; 0 holds them fixed, else the record may improve them.
    start_index : int, optional
        Number of ``values[0]`` counted from the recording's first sample, where t = 0.
    value_unit : str, optional
        Unit of the record, for the results.
    ruler : Ruler, optional
        Metres per radian.
    dark, dark_u : float, optional
        Level without light and its standard uncertainty, for the contrast.

    Returns
    -------
    FringeFit
        Extremes, working point, depths, reasons for distrust.

    Raises
    ------
    CalibrationError
        If rate, lines, extremes or the number of samples break a rule.

    Notes
    -----
    Least squares by Levenberg–Marquardt from several starts, drift as a cubic spline with as many
    pieces as the residuals ask for, then generalised least squares with a short whitening filter; u
    from the sandwich covariance, so that coloured and unequal residuals count. Depths from 0.02 to
    320 rad; below about 1 rad with a constant working point the extremes must be given.

    References
    ----------
    ISO 16063-11:1999, method 3 (sine approximation), cited from memory.
    """
    turns = checked_turns(rate_hz, frequencies_hz)
    values = checked_values(values, len(turns))
    prior = checked_prior(low, high, low_u, high_u)
    best, rival = search(values, turns, find_starts(values, turns, low, high), prior)
    if _is_poor(best):  # the working point may run too fast for long blocks
        starts = find_starts(values, turns, low, high, periods=6.0)
        other = search(values, turns, starts, prior)
        if other[0].squares < best.squares:
            best, rival = other
    stretch = 0.0
    if _is_poor(best):  # or the frequencies are not quite those of the record
        best, rival, stretch = _stretched(values, turns, low, high, prior, best, rival)
    found = finish(values, best, prior)
    fit = fringe_result(
        found,
        start_index=start_index,
        value_unit=value_unit,
        ruler=ruler,
        dark=dark,
        dark_u=dark_u,
        reasons=lambda fit: fringe_reasons(fit, prior, depths_of(fit), rival, values),
    )
    if not stretch:
        return fit
    from metro.measured import Measured

    more = fit.clock_offset or Measured.of(0.0, "1", 1.0 / (float(turns.max()) * len(values)))
    offset = stretch + (1.0 + stretch) * float(more.magnitude)
    return replace(fit, clock_offset=Measured.of(offset, "1", more.u_magnitude, more.dof))


def _stretched(
    values: NDArray[np.float64],
    turns: NDArray[np.float64],
    low: float | None,
    high: float | None,
    prior: Prior | None,
    best: Found,
    rival: float | None,
) -> tuple[Found, float | None, float]:
    """Return the best fit with all frequencies off by a share that the comb shows, and that share."""
    stretch = 0.0
    for share in likely_stretches(values, turns):
        moved = turns * (1.0 + share)
        other = search(values, moved, find_starts(values, moved, low, high), prior)
        if other[0].squares < best.squares:
            (best, rival), stretch = other, share
        if not _is_poor(best):
            break
    return best, rival, stretch


def _is_poor(found: Found) -> bool:
    """Return whether the residuals are beyond what a usable record has (about 13 dB)."""
    rms = math.sqrt(found.squares / len(found.model.index))
    return rms > 0.16 * abs(float(found.theta[1]))


def fit_driven_fringe(
    samples: "Quantity | NDArray[Any]",
    rate: "Quantity | str",
    frequencies: "Sequence[Quantity | str] | Quantity | str",
    wavelength: "Quantity | str | Measured | None" = None,
    *,
    low: "Quantity | str | Measured | float | None" = None,
    high: "Quantity | str | Measured | float | None" = None,
    dark: "Quantity | str | Measured | float | None" = None,
    index: "float | Quantity | Measured" = 1.0,
    round_trips: int = 1,
) -> FringeFit:
    """Fit a driven fringe: extremes, working point and depth of each line.

    Parameters
    ----------
    samples : Quantity or ndarray, shape (n,)
        Photodiode record; bare numbers have unit "1". NaN where samples are missing.
    rate : Quantity or str
        Sample rate, such as "4 kHz".
    frequencies : sequence of Quantity or str
        Lines, such as ["87.1 Hz"].
    wavelength : Quantity, str or Measured, optional
        Vacuum wavelength; without it there are no metres.
    low, high : Quantity, str, Measured or float, optional
        Extremes of the fringe, in the record's unit; a Measured brings its u.
    dark : Quantity, str, Measured or float, optional
        Level without light, for the contrast.
    index : float, Quantity or Measured, optional
        Refractive index in the arms, 1 in vacuum.
    round_trips : int, optional
        Round trips in each arm.

    Returns
    -------
    FringeFit
        ``phase_amplitude``, ``phase`` and ``displacement_amplitude`` in the order of the lines.

    Raises
    ------
    CalibrationError
        If lines, extremes or the number of samples break a rule.
    MetroError
        If a value lacks its unit.

    Examples
    --------
    >>> import numpy as np
    >>> t = np.arange(4000) / 4000
    >>> v = 2 + np.cos(1.4 + 3.0 * np.cos(2 * np.pi * 87.0 * t))
    >>> fit = fit_driven_fringe(v, "4 kHz", ["87 Hz"], "632.99 nm")
    >>> round(fit.phase_amplitude[0].magnitude, 6)
    3.0
    """
    from metro.units import si

    values, unit = _plain(samples)
    lines = cast("list[Any]", [frequencies] if _is_scalar(frequencies) else frequencies)
    hertz = [float(si(line, "frequencies", "Hz")) for line in lines]
    low_v, low_u = _extreme(low, "low", unit)
    high_v, high_u = _extreme(high, "high", unit)
    dark_v, dark_u = _extreme(dark, "dark", unit)
    return fit_driven_fringe_si(
        values,
        float(si(rate, "rate", "Hz", above=0.0)),
        hertz,
        low=low_v,
        high=high_v,
        low_u=low_u,
        high_u=high_u,
        value_unit=unit,
        ruler=None if wavelength is None else ruler_of(wavelength, index, round_trips),
        dark=dark_v,
        dark_u=dark_u,
    )


def _is_scalar(value: Any) -> bool:  # noqa: ANN401  # quantity or sequence
    return isinstance(value, str) or np.ndim(getattr(value, "magnitude", value)) == 0


def _plain(samples: Any) -> tuple[NDArray[np.float64], str]:  # noqa: ANN401  # quantity or array
    """Return samples as SI floats and their unit."""
    if not hasattr(samples, "magnitude"):
        return np.asarray(samples, dtype=float), "1"
    from metro.measured import Measured

    plain = Measured(samples)
    return np.asarray(plain.magnitude, dtype=float), plain.unit


def _extreme(value: Any, name: str, unit: str) -> tuple[float | None, float]:  # noqa: ANN401  # what fit_driven_fringe takes
    """Return a level as (float or None, u) in the record's unit."""
    from metro.measured import Measured
    from metro.units import si

    if value is None:
        return None, 0.0
    if isinstance(value, Measured):
        return float(si(value.value, name, unit)), float(value.u_magnitude or 0.0)
    return float(si(value, name, unit)), 0.0
