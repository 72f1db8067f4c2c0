"""Noise of light, resistors and converters, with values that carry units.

Densities are one-sided amplitude densities, in unit/√Hz.
"""

from __future__ import annotations

from typing import TYPE_CHECKING

from metro.elementwise import elementwise
from metro.kernel import noise as kernel
from metro.kernel.photodiode import step_v
from metro.units import quantity, si

if TYPE_CHECKING:
    from metro.units import Quantity

__all__ = ["johnson_current", "johnson_voltage", "quantisation_noise", "shot_current"]


def shot_current(current: Quantity | str) -> Quantity:
    """Return the shot noise of a current, √(2eI).

    Parameters
    ----------
    current : Quantity or str
        Mean current; ≥ 0, scalar or array.

    Returns
    -------
    Quantity
        Density [A/√Hz].

    Raises
    ------
    MetroError
        If the argument has the wrong dimension or is negative.

    References
    ----------
    W. Schottky, Ann. Phys. 362 (1918) 541.
    """
    amps = si(current, "current", "A", minimum=0.0)
    return quantity(elementwise(kernel.shot_current, amps), "A/Hz**0.5")


def johnson_voltage(resistance: Quantity | str, temperature: Quantity | str) -> Quantity:
    """Return the thermal noise voltage of a resistor, √(4kTR).

    Parameters
    ----------
    resistance : Quantity or str
        Resistance; ≥ 0, scalar or array.
    temperature : Quantity or str
        Temperature; above absolute zero.

    Returns
    -------
    Quantity
        Density [V/√Hz].

    Raises
    ------
    MetroError
        If an argument has the wrong dimension or is out of range.

    References
    ----------
    H. Nyquist, Phys. Rev. 32 (1928) 110.
    """
    ohms = si(resistance, "resistance", "ohm", minimum=0.0)
    kelvins = si(temperature, "temperature", "K", above=0.0)
    return quantity(elementwise(kernel.johnson_voltage, ohms, kelvins), "V/Hz**0.5")


def johnson_current(resistance: Quantity | str, temperature: Quantity | str) -> Quantity:
    """Return the thermal noise current of a resistor, √(4kT/R).

    Parameters
    ----------
    resistance : Quantity or str
        Resistance; > 0, scalar or array.
    temperature : Quantity or str
        Temperature; above absolute zero.

    Returns
    -------
    Quantity
        Density [A/√Hz].

    Raises
    ------
    MetroError
        If an argument has the wrong dimension or is out of range.

    References
    ----------
    H. Nyquist, Phys. Rev. 32 (1928) 110.
    """
    ohms = si(resistance, "resistance", "ohm", above=0.0)
    kelvins = si(temperature, "temperature", "K", above=0.0)
    return quantity(elementwise(kernel.johnson_current, ohms, kelvins), "A/Hz**0.5")


def quantisation_noise(adc_range: Quantity | str, bits: Quantity | float | str) -> Quantity:
    """Return the quantisation noise of an ideal converter, range/(2^bits·√12).

    Parameters
    ----------
    adc_range : Quantity or str
        Full scale from the lowest to the highest code; > 0.
    bits : Quantity, float or str
        Resolution, 1 … 32.

    Returns
    -------
    Quantity
        Root-mean-square noise [V]; right only if the input moves by about a count or more.

    Raises
    ------
    MetroError
        If an argument has the wrong dimension or is out of range.

    References
    ----------
    W. R. Bennett, Bell Syst. Tech. J. 27 (1948) 446.
    """
    volts = si(adc_range, "adc_range", "V", above=0.0)
    resolution = si(bits, "bits", "bit", minimum=1.0, maximum=32.0)
    return quantity(elementwise(kernel.quantisation_v, step_v(volts, resolution)), "V")
