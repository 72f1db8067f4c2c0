"""Displacement to phase and fringes, and back.

All are products and quotients, so that they take arrays as well as floats.
"""

from math import pi

__all__ = ["displacement_m", "fringes", "phase_per_metre", "phase_rad"]


def phase_per_metre(wavelength_m: float, index: float = 1.0, round_trips: float = 1.0) -> float:
    """Return the phase per differential displacement, 4πnN/λ.

    Parameters
    ----------
    wavelength_m : float
        Vacuum wavelength [m]; > 0.
    index : float, default 1
        Refractive index between the mirrors.
    round_trips : float, default 1
        Round trips N of the light in each arm; 1 in a simple Michelson.

    Returns
    -------
    float
        Phase per displacement [rad/m].

    References
    ----------
    BIPM, *Mise en pratique for the definition of the metre in the SI*, 2019: Δφ = 2πΔz/(λ/2).
    """
    return 4.0 * pi * round_trips * index / wavelength_m


def phase_rad(
    displacement_m: float, wavelength_m: float, index: float = 1.0, round_trips: float = 1.0
) -> float:
    """Return the phase of a differential displacement.

    Parameters
    ----------
    displacement_m : float
        Length of the x arm less that of the y arm, as a change [m].
    wavelength_m : float
        Vacuum wavelength [m]; > 0.
    index : float, default 1
        Refractive index between the mirrors.
    round_trips : float, default 1
        Round trips of the light in each arm.

    Returns
    -------
    float
        Phase [rad], not wrapped.
    """
    return displacement_m * (4.0 * pi * round_trips * index / wavelength_m)


def fringes(
    displacement_m: float, wavelength_m: float, index: float = 1.0, round_trips: float = 1.0
) -> float:
    """Return the number of fringes of a differential displacement.

    Parameters
    ----------
    displacement_m : float
        Differential displacement [m].
    wavelength_m : float
        Vacuum wavelength [m]; > 0.
    index : float, default 1
        Refractive index between the mirrors.
    round_trips : float, default 1
        Round trips of the light in each arm.

    Returns
    -------
    float
        Fringes, signed; λ/(2nN) is one.
    """
    return displacement_m * (2.0 * round_trips * index / wavelength_m)


def displacement_m(
    phase_rad: float, wavelength_m: float, index: float = 1.0, round_trips: float = 1.0
) -> float:
    """Return the differential displacement of a phase.

    Parameters
    ----------
    phase_rad : float
        Phase [rad], not wrapped.
    wavelength_m : float
        Vacuum wavelength [m]; > 0.
    index : float, default 1
        Refractive index between the mirrors.
    round_trips : float, default 1
        Round trips of the light in each arm.

    Returns
    -------
    float
        Differential displacement [m].
    """
    return phase_rad / (4.0 * pi * round_trips * index / wavelength_m)
