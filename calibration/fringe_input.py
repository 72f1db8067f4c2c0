"""What a driven fringe is fitted from, checked: rate, lines, samples, extremes."""

import math
from collections.abc import Sequence

import numpy as np
from numpy.typing import NDArray

from calibration.descent import Prior
from calibration.errors import CalibrationError

__all__ = ["checked_prior", "checked_turns", "checked_values"]

_FEWEST = 24


def checked_turns(rate_hz: float, frequencies_hz: Sequence[float]) -> NDArray[np.float64]:
    """Return the lines' phase per sample.

    Parameters
    ----------
    rate_hz : float
        Sample rate [Hz].
    frequencies_hz : sequence of float
        Lines [Hz].

    Returns
    -------
    ndarray, shape (n_lines,)
        Phases [rad], between 0 and π.

    Raises
    ------
    CalibrationError
        If the rate or a line breaks a rule.
    """
    if not (math.isfinite(rate_hz) and rate_hz > 0.0):
        raise CalibrationError(f"rate_hz must be finite and > 0 Hz, got {rate_hz}")
    frequencies = np.atleast_1d(np.asarray(frequencies_hz, dtype=float))
    if frequencies.ndim != 1 or not len(frequencies):
        raise CalibrationError("at least one line frequency is needed")
    for frequency in frequencies.tolist():
        if not 0.0 < frequency < rate_hz / 2.0:
            raise CalibrationError(
                f"a line must lie above 0 Hz and below half the rate, {rate_hz / 2:g} Hz, "
                f"got {frequency:g} Hz"
            )
    if len(set(frequencies.tolist())) < len(frequencies):
        raise CalibrationError(f"the same line is given twice: {frequencies.tolist()} Hz")
    return np.asarray(2.0 * np.pi * frequencies / rate_hz)


def checked_values(values: NDArray[np.float64], n_lines: int) -> NDArray[np.float64]:
    """Return the samples as floats, NaN where they are not finite.

    Parameters
    ----------
    values : ndarray, shape (n,)
        Record.
    n_lines : int
        Lines to be fitted.

    Returns
    -------
    ndarray, shape (n,)
        The record.

    Raises
    ------
    CalibrationError
        If there are too few samples or they do not change.
    """
    values = np.asarray(values, dtype=float)
    if values.ndim != 1:
        raise CalibrationError(f"samples must have shape (n,), got {values.shape}")
    good = np.isfinite(values)
    least = max(_FEWEST, 10 * n_lines)
    if good.sum() < least:
        raise CalibrationError(f"a driven fringe needs {least} samples, got {int(good.sum())}")
    if np.ptp(values[good]) <= 0.0:
        raise CalibrationError(f"the record does not change: every sample is {values[good][0]:g}")
    return np.where(good, values, np.nan)


def checked_prior(
    low: float | None, high: float | None, low_u: float, high_u: float
) -> Prior | None:
    """Return what the given extremes say of offset and half span.

    Parameters
    ----------
    low, high : float or None
        Extremes, both or neither.
    low_u, high_u : float
        Their standard uncertainties; both 0 hold them fixed.

    Returns
    -------
    Prior or None
        None where nothing was given.

    Raises
    ------
    CalibrationError
        If one is missing, or they do not rise.
    """
    if low is None and high is None:
        return None
    if low is None or high is None:
        raise CalibrationError("low and high must be given together")
    if not (math.isfinite(low) and math.isfinite(high) and high > low):
        raise CalibrationError(f"high must be above low, got low {low:g} and high {high:g}")
    if not (low_u >= 0.0 and high_u >= 0.0):
        raise CalibrationError(f"low_u and high_u must be ≥ 0, got {low_u:g} and {high_u:g}")
    turn = np.array([[0.5, 0.5], [-0.5, 0.5]])
    value = turn @ np.array([low, high])
    if max(low_u, high_u) < 1e-9 * (high - low):
        return Prior(value, np.zeros((2, 2)), fixed=True)
    least = 1e-9 * (high - low)
    covariance = turn @ np.diag([max(low_u, least) ** 2, max(high_u, least) ** 2]) @ turn.T
    return Prior(value, np.linalg.inv(covariance), fixed=False)
