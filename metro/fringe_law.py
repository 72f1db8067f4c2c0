"""The fringe law, its slopes and its inverse, with values that carry units."""

from __future__ import annotations

import math
from typing import TYPE_CHECKING, Any

from metro.elementwise import is_array
from metro.errors import MetroError
from metro.fringe_arrays import phases_on_slope_rad, voltage_slopes, voltages
from metro.kernel import contrast as contrast_kernel
from metro.kernel import lines as lines_kernel
from metro.units import quantity, si

if TYPE_CHECKING:
    from metro.units import Quantity

__all__ = [
    "SLOPES",
    "contrast",
    "fringe_slope",
    "fringe_voltage",
    "line_responses",
    "phase_on_slope",
    "slope_phase_rad",
]


SLOPES = ("rising", "falling")


def fringe_voltage(phase: Quantity | str, low: Quantity | str, high: Quantity | str) -> Quantity:
    """Return the voltage at a phase, (high+low)/2 + (high−low)/2·cos φ.

    Parameters
    ----------
    phase : Quantity or str
        Phase, 0 at this detector's maximum; scalar or array.
    low, high : Quantity or str
        Extremes of the fringe; low < high.

    Returns
    -------
    Quantity
        Voltage [V].

    Raises
    ------
    MetroError
        If an argument has the wrong dimension or low is not below high.
    """
    return quantity(voltages(si(phase, "phase", "rad"), *_extremes(low, high)), "V")


def fringe_slope(phase: Quantity | str, low: Quantity | str, high: Quantity | str) -> Quantity:
    """Return the slope of the fringe at a phase, −(high−low)/2·sin φ.

    Parameters
    ----------
    phase : Quantity or str
        Phase, 0 at this detector's maximum; scalar or array.
    low, high : Quantity or str
        Extremes of the fringe; low < high.

    Returns
    -------
    Quantity
        Slope [V/rad], positive on the rising slope.

    Raises
    ------
    MetroError
        If an argument has the wrong dimension or low is not below high.
    """
    return quantity(voltage_slopes(si(phase, "phase", "rad"), *_extremes(low, high)), "V/rad")


def phase_on_slope(
    voltage: Quantity | str,
    low: Quantity | str,
    high: Quantity | str,
    slope: str = "rising",
) -> Quantity:
    """Return the phase at which the detector shows a voltage, on a named slope.

    Parameters
    ----------
    voltage : Quantity or str
        Voltage from low to high; scalar or array.
    low, high : Quantity or str
        Extremes of the fringe; low < high.
    slope : str, default "rising"
        ``"rising"`` (phase in −π … 0) or ``"falling"`` (0 … π).

    Returns
    -------
    Quantity
        Phase [rad], modulo 2π.

    Raises
    ------
    MetroError
        If an argument has the wrong dimension, the slope another name, or the voltage lies outside
        the extremes.
    """
    low_v, high_v = _extremes(low, high)
    volts = si(voltage, "voltage", "V", minimum=low_v, maximum=high_v)
    rising = _is_rising(slope)
    return quantity(phases_on_slope_rad(volts, low_v, high_v, rising=rising), "rad")


def contrast(low: Quantity | str, high: Quantity | str, dark: Quantity | str = "0 V") -> Quantity:
    """Return the contrast of a fringe, (high − low)/(high + low − 2·dark).

    Parameters
    ----------
    low, high : Quantity or str
        Extremes of the fringe; low < high.
    dark : Quantity or str, default "0 V"
        Voltage without light; below the middle of the fringe.

    Returns
    -------
    Quantity
        Contrast, dimensionless; above 1 only if the dark voltage is wrong.

    Raises
    ------
    MetroError
        If an argument has the wrong dimension or is out of range.
    """
    low_v, high_v = _extremes(low, high)
    dark_v = si(dark, "dark", "V", below=0.5 * (low_v + high_v))
    return quantity(contrast_kernel.contrast(low_v, high_v, dark_v), "1")


def line_responses(
    depths: Quantity | str,
    working_phase: Quantity | str = "90 deg",
    background: Quantity | str = "0 rad",
) -> Quantity:
    """Return what is left of each line's small-signal response when all move at once.

    Parameters
    ----------
    depths : Quantity or str
        Phase amplitude of each line, shape (n_lines,); a scalar is one line.
    working_phase : Quantity or str, default "90 deg"
        Mean phase, 0 at this detector's maximum; mid-fringe if not given.
    background : Quantity or str, default "0 rad"
        Root-mean-square of all other phase motion, taken as Gaussian; ≥ 0.

    Returns
    -------
    Quantity
        S_i = sin φ0 · 2J1(m_i)/m_i · Π_{j≠i} J0(m_j) · exp(−σφ²/2), dimensionless, shape (n_lines,).

    Raises
    ------
    MetroError
        If an argument has the wrong dimension or is out of range.

    Notes
    -----
    The frequencies must not be harmonics or sums of each other.
    """
    given = si(depths, "depths", "rad")
    phase = _scalar(si(working_phase, "working_phase", "rad"), "working_phase")
    rms = _scalar(si(background, "background", "rad", minimum=0.0), "background")
    if not is_array(given):
        return quantity(lines_kernel.line_responses([given], phase, rms)[0], "1")
    import numpy as np

    return quantity(np.array(lines_kernel.line_responses(given.tolist(), phase, rms)), "1")


def slope_phase_rad(slope: str) -> float:
    """Return the phase in the middle of a named slope.

    Parameters
    ----------
    slope : str
        ``"rising"`` or ``"falling"``.

    Returns
    -------
    float
        −π/2 or π/2 [rad].

    Raises
    ------
    MetroError
        If the slope has another name.
    """
    return -0.5 * math.pi if _is_rising(slope) else 0.5 * math.pi


def _extremes(low: Any, high: Any) -> tuple[float, float]:  # noqa: ANN401  # as the public functions take them
    low_v = _scalar(si(low, "low", "V"), "low")
    return low_v, _scalar(si(high, "high", "V", above=low_v), "high")


def _scalar(value: Any, name: str) -> float:  # noqa: ANN401  # what si() gave
    if is_array(value):
        raise MetroError(f"{name} must be one value, got {value.size}")
    return float(value)


def _is_rising(slope: str) -> bool:
    if slope not in SLOPES:
        raise MetroError(f"slope must be 'rising' or 'falling', got {slope!r}")
    return slope == "rising"
