"""Detectors with two outputs, antiphase or in quadrature, with values that carry units."""

from __future__ import annotations

from typing import TYPE_CHECKING, Any

from metro.elementwise import is_array
from metro.kernel import ports as kernel
from metro.units import quantity, si

if TYPE_CHECKING:
    from metro.units import Quantity

__all__ = ["antiphase_powers", "quadrature_phase", "quadrature_voltages"]


def antiphase_powers(
    phase: Quantity | str, mean_power: Quantity | str, contrast: Quantity | float | str = 1.0
) -> tuple[Quantity, Quantity]:
    """Return the powers at the two ports of a lossless beam splitter.

    Parameters
    ----------
    phase : Quantity or str
        Phase, 0 at the first port's maximum; scalar or array.
    mean_power : Quantity or str
        Mean power of the fringe on each port; ≥ 0.
    contrast : Quantity, float or str, default 1
        Contrast, 0 … 1.

    Returns
    -------
    tuple of Quantity
        Powers [W]; their sum does not depend on the phase.

    Raises
    ------
    MetroError
        If an argument has the wrong dimension or is out of range.
    """
    angle = si(phase, "phase", "rad")
    mean = si(mean_power, "mean_power", "W", minimum=0.0)
    share = si(contrast, "contrast", "1", minimum=0.0, maximum=1.0)
    if not is_array(angle):
        first, second = kernel.antiphase_powers(angle, mean, share)
    else:
        import numpy as np

        swing: Any = mean * share * np.cos(angle)
        first, second = mean + swing, mean - swing
    return quantity(first, "W"), quantity(second, "W")


def quadrature_voltages(
    phase: Quantity | str,
    amplitude: Quantity | str,
    gain_ratio: Quantity | float | str = 1.0,
    lag: Quantity | str = "0 rad",
) -> tuple[Quantity, Quantity]:
    """Return the two voltages of a quadrature detector, offsets left out.

    Parameters
    ----------
    phase : Quantity or str
        Phase; scalar or array.
    amplitude : Quantity or str
        Amplitude of the first voltage; > 0.
    gain_ratio : Quantity, float or str, default 1
        Amplitude of the first voltage over that of the second; > 0.
    lag : Quantity or str, default "0 rad"
        By how much the two are off a right angle, less than one.

    Returns
    -------
    tuple of Quantity
        A·cos φ and A·sin(φ − α)/r [V].

    Raises
    ------
    MetroError
        If an argument has the wrong dimension or is out of range.

    References
    ----------
    P. L. M. Heydemann, Appl. Opt. 20 (1981) 3382 (from memory).
    """
    angle = si(phase, "phase", "rad")
    volts = si(amplitude, "amplitude", "V", above=0.0)
    ratio, off = _imbalance(gain_ratio, lag)
    if not is_array(angle):
        first, second = kernel.quadrature_signals(angle, volts, ratio, off)
    else:
        import numpy as np

        first, second = volts * np.cos(angle), volts * np.sin(angle - off) / ratio
    return quantity(first, "V"), quantity(second, "V")


def quadrature_phase(
    first: Quantity | str,
    second: Quantity | str,
    gain_ratio: Quantity | float | str = 1.0,
    lag: Quantity | str = "0 rad",
) -> Quantity:
    """Return the phase of a quadrature detector, offsets subtracted.

    Parameters
    ----------
    first, second : Quantity or str
        The two voltages; scalars or arrays.
    gain_ratio : Quantity, float or str, default 1
        Amplitude of the first voltage over that of the second; > 0.
    lag : Quantity or str, default "0 rad"
        By how much the two are off a right angle, less than one.

    Returns
    -------
    Quantity
        Phase [rad] in −π … π; unwrapping it is ambiguous where it moves by π between samples.

    Raises
    ------
    MetroError
        If an argument has the wrong dimension or is out of range.
    """
    one, two = si(first, "first", "V"), si(second, "second", "V")
    ratio, off = _imbalance(gain_ratio, lag)
    if not is_array(one, two):
        return quantity(kernel.quadrature_phase(one, two, ratio, off), "rad")
    import numpy as np

    sine = (ratio * two + one * np.sin(off)) / np.cos(off)
    return quantity(np.arctan2(sine, one), "rad")


def _imbalance(gain_ratio: Any, lag: Any) -> tuple[float, float]:  # noqa: ANN401  # as the public functions take them
    ratio = float(si(gain_ratio, "gain_ratio", "1", above=0.0))
    return ratio, float(si(lag, "lag", "rad", above=-1.5, below=1.5))
