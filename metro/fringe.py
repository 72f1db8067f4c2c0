"""Displacement, phase and fringes, and the fringe law, with values that carry units."""

from __future__ import annotations

import math
from typing import TYPE_CHECKING, Any

from metro.elementwise import is_array
from metro.errors import MetroError
from metro.kernel import fringe as kernel
from metro.kernel.light import vacuum_wavelength_m
from metro.units import quantity, si

if TYPE_CHECKING:
    from metro.units import Quantity

__all__ = [
    "SLOPES",
    "contrast",
    "displacement",
    "fringe_slope",
    "fringe_voltage",
    "fringes",
    "line_responses",
    "phase",
    "phase_changes",
    "phase_on_slope",
    "phases_on_slope_rad",
    "signal_changes",
    "slope_phase_rad",
    "vacuum_wavelength",
    "voltage_slopes",
    "voltages",
]

SLOPES = ("rising", "falling")


def phase(
    displacement: Quantity | str,
    wavelength: Quantity | str,
    index: Quantity | float = 1.0,
    round_trips: Quantity | float = 1,
) -> Quantity:
    """Return the phase of a differential displacement.

    Parameters
    ----------
    displacement : Quantity or str
        Length of the x arm less that of the y arm, as a change; scalar or array.
    wavelength : Quantity or str
        Vacuum wavelength; > 0.
    index : Quantity or float, default 1
        Refractive index between the mirrors; at least 1.
    round_trips : Quantity or float, default 1
        Round trips of the light in each arm; > 0, 1 in a simple Michelson.

    Returns
    -------
    Quantity
        Phase [rad], not wrapped: 2π · 2·round_trips · index · displacement / wavelength.

    Raises
    ------
    MetroError
        If an argument has the wrong dimension or is out of range.

    References
    ----------
    BIPM, *Mise en pratique for the definition of the metre in the SI*, 2019: Δφ = 2πΔz/(λ/2).
    """
    x = si(displacement, "displacement", "m")
    return quantity(kernel.phase_rad(x, *_light(wavelength, index, round_trips)), "rad")


def fringes(
    displacement: Quantity | str,
    wavelength: Quantity | str,
    index: Quantity | float = 1.0,
    round_trips: Quantity | float = 1,
) -> Quantity:
    """Return the number of fringes of a differential displacement.

    Parameters
    ----------
    displacement : Quantity or str
        Differential displacement; scalar or array.
    wavelength : Quantity or str
        Vacuum wavelength; > 0.
    index : Quantity or float, default 1
        Refractive index between the mirrors; at least 1.
    round_trips : Quantity or float, default 1
        Round trips of the light in each arm; > 0.

    Returns
    -------
    Quantity
        Fringes, signed, as a pure number; half a wavelength is one fringe of a simple Michelson.

    Raises
    ------
    MetroError
        If an argument has the wrong dimension or is out of range.
    """
    x = si(displacement, "displacement", "m")
    return quantity(kernel.fringes(x, *_light(wavelength, index, round_trips)), "1")


def displacement(
    phase: Quantity | str,
    wavelength: Quantity | str,
    index: Quantity | float = 1.0,
    round_trips: Quantity | float = 1,
) -> Quantity:
    """Return the differential displacement of a phase.

    Parameters
    ----------
    phase : Quantity or str
        Phase, not wrapped, in rad, deg or fringe; scalar or array.
    wavelength : Quantity or str
        Vacuum wavelength; > 0.
    index : Quantity or float, default 1
        Refractive index between the mirrors; at least 1.
    round_trips : Quantity or float, default 1
        Round trips of the light in each arm; > 0.

    Returns
    -------
    Quantity
        Differential displacement [m].

    Raises
    ------
    MetroError
        If an argument has the wrong dimension or is out of range.
    """
    angle = si(phase, "phase", "rad")
    return quantity(kernel.displacement_m(angle, *_light(wavelength, index, round_trips)), "m")


def vacuum_wavelength(frequency: Quantity | str) -> Quantity:
    """Return the vacuum wavelength of light of a frequency, c/f.

    Parameters
    ----------
    frequency : Quantity or str
        Optical frequency, such as ``"473.612353604 THz"``; > 0.

    Returns
    -------
    Quantity
        Wavelength [m].

    Raises
    ------
    MetroError
        If the argument has the wrong dimension or is not positive.
    """
    hertz = si(frequency, "frequency", "Hz", above=0.0)
    return quantity(vacuum_wavelength_m(hertz), "m")


def _light(wavelength: Any, index: Any, round_trips: Any) -> tuple[Any, Any, Any]:  # noqa: ANN401  # as the public functions take them
    return (
        si(wavelength, "wavelength", "m", above=0.0),
        si(index, "index", "1", minimum=1.0),
        si(round_trips, "round_trips", "1", above=0.0),
    )


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
    return quantity(kernel.contrast(low_v, high_v, dark_v), "1")


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
        return quantity(kernel.line_responses([given], phase, rms)[0], "1")
    import numpy as np

    return quantity(np.array(kernel.line_responses(given.tolist(), phase, rms)), "1")


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
