"""Optical power to current, voltage and counts, with values that carry units."""

from __future__ import annotations

from typing import TYPE_CHECKING, Any

from metro.elementwise import is_array
from metro.errors import MetroError
from metro.kernel import photodiode as kernel
from metro.units import quantity, si

if TYPE_CHECKING:
    from metro.units import Quantity

__all__ = [
    "adc_codes",
    "adc_counts",
    "adc_step",
    "photocurrent",
    "quantum_efficiency",
    "responsivity",
    "voltage",
]


def responsivity(
    quantum_efficiency: Quantity | float | str, wavelength: Quantity | str
) -> Quantity:
    """Return the responsivity of a photodiode, ηeλ/(hc).

    Parameters
    ----------
    quantum_efficiency : Quantity, float or str
        Electrons per photon η; 0 … 1, 0 excluded.
    wavelength : Quantity or str
        Vacuum wavelength; > 0.

    Returns
    -------
    Quantity
        Responsivity [A/W].

    Raises
    ------
    MetroError
        If an argument has the wrong dimension or is out of range.
    """
    eta = si(quantum_efficiency, "quantum_efficiency", "1", above=0.0, maximum=1.0)
    lam = si(wavelength, "wavelength", "m", above=0.0)
    return quantity(kernel.responsivity_a_w(eta, lam), "A/W")


def quantum_efficiency(responsivity: Quantity | str, wavelength: Quantity | str) -> Quantity:
    """Return the quantum efficiency that a responsivity means.

    Parameters
    ----------
    responsivity : Quantity or str
        Current per power; > 0.
    wavelength : Quantity or str
        Vacuum wavelength; > 0.

    Returns
    -------
    Quantity
        Electrons per photon, dimensionless; above 1 one of the two is wrong or the diode amplifies.

    Raises
    ------
    MetroError
        If an argument has the wrong dimension or is out of range.
    """
    amps_per_watt = si(responsivity, "responsivity", "A/W", above=0.0)
    lam = si(wavelength, "wavelength", "m", above=0.0)
    return quantity(kernel.quantum_efficiency(amps_per_watt, lam), "1")


def photocurrent(power: Quantity | str, responsivity: Quantity | str) -> Quantity:
    """Return the photocurrent of a power, or its change from the power's change.

    Parameters
    ----------
    power : Quantity or str
        Optical power on the photodiode; scalar or array.
    responsivity : Quantity or str
        Current per power; > 0.

    Returns
    -------
    Quantity
        Current [A].

    Raises
    ------
    MetroError
        If an argument has the wrong dimension or is out of range.
    """
    watts = si(power, "power", "W")
    return quantity(
        kernel.current_a(watts, si(responsivity, "responsivity", "A/W", above=0.0)), "A"
    )


def voltage(current: Quantity | str, transimpedance: Quantity | str) -> Quantity:
    """Return the amplifier's voltage for a current at low frequency.

    Parameters
    ----------
    current : Quantity or str
        Photocurrent; scalar or array.
    transimpedance : Quantity or str
        Voltage per current; negative if the amplifier inverts.

    Returns
    -------
    Quantity
        Voltage [V].

    Raises
    ------
    MetroError
        If an argument has the wrong dimension.
    """
    amps = si(current, "current", "A")
    return quantity(kernel.voltage_v(amps, si(transimpedance, "transimpedance", "V/A")), "V")


def adc_step(adc_range: Quantity | str, bits: Quantity | float | str) -> Quantity:
    """Return the voltage of one count, range/2^bits.

    Parameters
    ----------
    adc_range : Quantity or str
        Full scale from the lowest to the highest code; > 0.
    bits : Quantity, float or str
        Resolution, 1 … 32.

    Returns
    -------
    Quantity
        Volts per count [V].

    Raises
    ------
    MetroError
        If an argument has the wrong dimension or is out of range.
    """
    volts = si(adc_range, "adc_range", "V", above=0.0)
    resolution = si(bits, "bits", "bit", minimum=1.0, maximum=32.0)
    return quantity(kernel.step_v(volts, resolution), "V")


def adc_counts(
    voltage: Quantity | str,
    adc_range: Quantity | str,
    bits: Quantity | float | str,
    offset: Quantity | str = "0 V",
) -> Quantity:
    """Return the reading of an ideal converter, not yet rounded.

    Parameters
    ----------
    voltage : Quantity or str
        Voltage at the converter; scalar or array.
    adc_range : Quantity or str
        Full scale; > 0.
    bits : Quantity, float or str
        Resolution, 1 … 32.
    offset : Quantity or str, default "0 V"
        Voltage that reads 0.

    Returns
    -------
    Quantity
        Counts, as a pure number.

    Raises
    ------
    MetroError
        If an argument has the wrong dimension or is out of range.
    """
    volts = si(voltage, "voltage", "V")
    full = si(adc_range, "adc_range", "V", above=0.0)
    resolution = si(bits, "bits", "bit", minimum=1.0, maximum=32.0)
    return quantity(kernel.counts(volts, full, resolution, si(offset, "offset", "V")), "1")


def adc_codes(
    voltage: Quantity | str,
    adc_range: Quantity | str,
    bits: Quantity | float | str,
    offset: Quantity | str = "0 V",
    signed: bool = True,
) -> tuple[Any, Any]:
    """Return the codes of an ideal converter, and which of them are out of range.

    Parameters
    ----------
    voltage : Quantity or str
        Voltage at the converter; scalar or array.
    adc_range : Quantity or str
        Full scale; > 0.
    bits : Quantity, float or str
        Resolution, a whole number from 1 to 32.
    offset : Quantity or str, default "0 V"
        Voltage that reads 0.
    signed : bool, default True
        Codes on both sides of 0; otherwise from 0 upwards.

    Returns
    -------
    tuple of (ndarray of int64, ndarray of bool)
        Codes and over-range marks, shaped as ``voltage``; plain int and bool for a scalar.

    Raises
    ------
    MetroError
        If an argument has the wrong dimension or is out of range.
    """
    volts = si(voltage, "voltage", "V")
    full = float(si(adc_range, "adc_range", "V", above=0.0))
    resolution = _whole_bits(bits)
    zero = float(si(offset, "offset", "V"))
    if not is_array(volts):
        return kernel.adc_code(volts, full, resolution, zero, signed)
    import numpy as np

    lowest = -(2 ** (resolution - 1)) if signed else 0
    highest = lowest + 2**resolution - 1
    codes = np.floor(kernel.counts(volts, full, resolution, zero) + 0.5)
    codes = np.clip(codes, lowest, highest).astype(np.int64)
    return codes, (codes == lowest) | (codes == highest)


def _whole_bits(bits: Quantity | float | str) -> int:
    resolution = float(si(bits, "bits", "bit", minimum=1.0, maximum=32.0))
    if resolution != int(resolution):
        raise MetroError(f"bits must be a whole number, got {bits!r}")
    return int(resolution)
