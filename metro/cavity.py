"""Fabry–Perot arms, with values that carry units."""

from __future__ import annotations

from typing import TYPE_CHECKING, Any

from metro.elementwise import elementwise
from metro.errors import MetroError
from metro.kernel import cavity as kernel
from metro.units import quantity, si

if TYPE_CHECKING:
    from collections.abc import Callable

    from metro.units import Quantity

__all__ = ["cavity_pole", "cavity_response", "finesse", "phase_gain"]


def phase_gain(
    input_reflectance: Quantity | float | str, end_reflectance: Quantity | float | str = 1.0
) -> Quantity:
    """Return by how much a Fabry–Perot arm on resonance multiplies the phase of one round trip.

    Parameters
    ----------
    input_reflectance : Quantity, float or str
        Power reflectance of the mirror that couples the light in, 0 … 1; below the other one.
    end_reflectance : Quantity, float or str, default 1
        Power reflectance of the end mirror, 0 … 1.

    Returns
    -------
    Quantity
        Dimensionless; (1+√R)/(1−√R) for a perfect end mirror. It holds for displacements far
        below the width of the resonance.

    Raises
    ------
    MetroError
        If an argument has a dimension or is out of range.

    References
    ----------
    P. R. Saulson, *Fundamentals of Interferometric Gravitational Wave Detectors*, World Scientific
    1994, chapter 6 (from memory).
    """
    mirrors = _mirrors(input_reflectance, end_reflectance)
    return quantity(_checked(kernel.phase_gain, *mirrors), "1")


def finesse(
    input_reflectance: Quantity | float | str, end_reflectance: Quantity | float | str = 1.0
) -> Quantity:
    """Return the finesse of a Fabry–Perot arm.

    Parameters
    ----------
    input_reflectance, end_reflectance : Quantity, float or str
        Power reflectances of the two mirrors, 0 … 1.

    Returns
    -------
    Quantity
        Free spectral range over the full width at half height, dimensionless.

    Raises
    ------
    MetroError
        If an argument has a dimension or is out of range.
    """
    mirrors = _mirrors(input_reflectance, end_reflectance)
    return quantity(_checked(kernel.finesse, *mirrors), "1")


def cavity_pole(
    arm_length: Quantity | str,
    input_reflectance: Quantity | float | str,
    end_reflectance: Quantity | float | str = 1.0,
) -> Quantity:
    """Return the frequency at which a Fabry–Perot arm's response has fallen by 3 dB.

    Parameters
    ----------
    arm_length : Quantity or str
        Length of the arm; > 0.
    input_reflectance, end_reflectance : Quantity, float or str
        Power reflectances of the two mirrors, 0 … 1.

    Returns
    -------
    Quantity
        Frequency [Hz], c/(4·length·finesse).

    Raises
    ------
    MetroError
        If an argument has the wrong dimension or is out of range.
    """
    length = si(arm_length, "arm_length", "m", above=0.0)
    mirrors = _mirrors(input_reflectance, end_reflectance)
    return quantity(_checked(kernel.cavity_pole_hz, length, *mirrors), "Hz")


def cavity_response(
    frequency: Quantity | str,
    arm_length: Quantity | str,
    input_reflectance: Quantity | float | str,
    end_reflectance: Quantity | float | str = 1.0,
) -> Quantity:
    """Return what storage in a Fabry–Perot arm on resonance leaves, relative to frequency zero.

    Parameters
    ----------
    frequency : Quantity or str
        Frequency; scalar or array.
    arm_length : Quantity or str
        Length of the arm; > 0.
    input_reflectance, end_reflectance : Quantity, float or str
        Power reflectances of the two mirrors, 0 … 1.

    Returns
    -------
    Quantity
        Complex, dimensionless.

    Raises
    ------
    MetroError
        If an argument has the wrong dimension or is out of range.
    """
    hertz = si(frequency, "frequency", "Hz")
    length = si(arm_length, "arm_length", "m", above=0.0)
    mirrors = _mirrors(input_reflectance, end_reflectance)
    return quantity(elementwise(kernel.cavity_response, hertz, length, *mirrors), "1")


def _mirrors(first: Any, second: Any) -> tuple[Any, Any]:  # noqa: ANN401  # as the public functions take them
    return (
        si(first, "input_reflectance", "1", minimum=0.0, maximum=1.0),
        si(second, "end_reflectance", "1", minimum=0.0, maximum=1.0),
    )


def _checked(function: Callable[..., float], *values: Any) -> Any:  # noqa: ANN401  # floats and arrays alike
    try:
        return elementwise(function, *values)
    except ValueError as error:
        raise MetroError(str(error)) from None
