"""The fringe law over arrays of plain numbers, for the samples of a recording."""

from __future__ import annotations

import math
from typing import Any

from metro.elementwise import is_array
from metro.errors import MetroError
from metro.kernel import fringe as kernel

__all__ = ["phase_changes", "phases_on_slope_rad", "signal_changes", "voltage_slopes", "voltages"]


def voltages(phase_rad: Any, low: float, high: float) -> Any:  # noqa: ANN401  # floats and arrays alike
    """Return the fringe law over plain numbers.

    Parameters
    ----------
    phase_rad : float or ndarray
        Phase [rad], 0 at this detector's maximum.
    low, high : float
        Extremes of the fringe [V].

    Returns
    -------
    float or ndarray
        Voltage [V].
    """
    if not is_array(phase_rad):
        return kernel.voltage(phase_rad, low, high)
    import numpy as np

    return kernel.voltage_of_cosine(np.cos(phase_rad), low, high)


def voltage_slopes(phase_rad: Any, low: float, high: float) -> Any:  # noqa: ANN401  # floats and arrays alike
    """Return the slope of the fringe law over plain numbers.

    Parameters
    ----------
    phase_rad : float or ndarray
        Phase [rad], 0 at this detector's maximum.
    low, high : float
        Extremes of the fringe [V].

    Returns
    -------
    float or ndarray
        Slope [V/rad].
    """
    if not is_array(phase_rad):
        return kernel.voltage_slope(phase_rad, low, high)
    import numpy as np

    return kernel.voltage_slope_of_sine(np.sin(phase_rad), low, high)


def phases_on_slope_rad(voltage_v: Any, low: float, high: float, *, rising: bool) -> Any:  # noqa: ANN401  # floats and arrays alike
    """Return the inverse of the fringe law over plain numbers, on a named slope.

    Parameters
    ----------
    voltage_v : float or ndarray
        Voltage [V].
    low, high : float
        Extremes of the fringe [V].
    rising : bool
        Whether the slope is the rising one.

    Returns
    -------
    float or ndarray
        Phase [rad]; in an array NaN where the voltage lies outside the extremes.
    """
    if not is_array(voltage_v):
        return kernel.phase_of_voltage(voltage_v, low, high, rising)
    import numpy as np

    with np.errstate(invalid="ignore"):  # outside the extremes, or missing samples
        angles = 2.0 * np.arctan2(np.sqrt(high - voltage_v), np.sqrt(voltage_v - low))
    return -angles if rising else angles


def signal_changes(phase_change_rad: Any, working_phase_rad: float) -> Any:  # noqa: ANN401  # floats and arrays alike
    """Return the change of the fringe law over half its height, over plain numbers.

    Parameters
    ----------
    phase_change_rad : float or ndarray
        Change of the phase from the working point [rad].
    working_phase_rad : float
        Phase of the working point [rad].

    Returns
    -------
    float or ndarray
        Change in units of (high−low)/2.
    """
    if not is_array(phase_change_rad):
        return kernel.signal_change(phase_change_rad, working_phase_rad)
    import numpy as np

    half = 0.5 * phase_change_rad
    return -2.0 * np.sin(working_phase_rad + half) * np.sin(half)


def phase_changes(signal_change: Any, working_phase_rad: float) -> Any:  # noqa: ANN401  # floats and arrays alike
    """Return the phase change behind a change of the fringe law, over plain numbers.

    Parameters
    ----------
    signal_change : float or ndarray
        Change in units of (high−low)/2.
    working_phase_rad : float
        Phase of the working point [rad]; its slope is the branch.

    Returns
    -------
    float or ndarray
        Change of the phase [rad]; in an array NaN where the signal leaves the extremes.
    """
    if not is_array(signal_change):
        try:
            return kernel.phase_change(signal_change, working_phase_rad)
        except ValueError as error:
            raise MetroError(str(error)) from None
    import numpy as np

    s, c = math.cos(working_phase_rad), math.sin(working_phase_rad)
    v = s + signal_change
    with np.errstate(invalid="ignore"):  # beyond the extremes, or missing samples
        w = np.sqrt((1.0 - v) * (1.0 + v))
        sine = signal_change * (abs(c) + s * (2.0 * s + signal_change) / (abs(c) + w))
    changes = np.arctan2(sine, abs(c) * w + s * v)
    return changes if c < 0.0 else -changes
