"""Displacement to phase and fringes, and back, with values that carry units."""

from __future__ import annotations

from typing import TYPE_CHECKING, Any

from metro.kernel import phase as kernel
from metro.kernel.light import vacuum_wavelength_m
from metro.units import quantity, si

if TYPE_CHECKING:
    from metro.units import Quantity

__all__ = ["displacement", "fringes", "phase", "vacuum_wavelength"]


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
