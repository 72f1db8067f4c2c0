"""Response of a pair of arms to the direction and the polarisation of a wave.

Arms lie along x and y, the source at (θ, φ) in polar coordinates about z, and ψ turns the
wave's polarisation axes.

References
----------
K. S. Thorne, in *Three Hundred Years of Gravitation*, ed. Hawking and Israel, Cambridge 1987,
section 9.5.2; M. Maggiore, *Gravitational Waves*, volume 1, Oxford 2007, section 7.2. The sign of
the cross response depends on the handedness chosen for the polarisation axes.
"""

from math import cos, pi, sin

from .arms import arm_response

__all__ = ["antenna_response", "arm_direction_cosines", "detector_response"]


def antenna_response(
    theta_rad: float, phi_rad: float, psi_rad: float, opening_rad: float = 0.5 * pi
) -> tuple[float, float]:
    """Return the long-wave response to the plus and the cross polarisation.

    Parameters
    ----------
    theta_rad, phi_rad : float
        Polar angle and azimuth of the source [rad].
    psi_rad : float
        Polarisation angle [rad].
    opening_rad : float, default π/2
        Angle between the arms [rad]; their bisector stays where it is.

    Returns
    -------
    tuple of float
        Plus and cross response; the differential displacement is their sum over h₊, h× times L.

    Notes
    -----
    F₊ = ½(1+cos²θ)cos2φ cos2ψ − cosθ sin2φ sin2ψ and
    F× = ½(1+cos²θ)cos2φ sin2ψ + cosθ sin2φ cos2ψ, both times the sine of the opening angle.
    """
    cosine = cos(theta_rad)
    even = 0.5 * (1.0 + cosine * cosine) * cos(2.0 * phi_rad)
    odd = cosine * sin(2.0 * phi_rad)
    c, s = cos(2.0 * psi_rad), sin(2.0 * psi_rad)
    scale = sin(opening_rad)
    return scale * (even * c - odd * s), scale * (even * s + odd * c)


def arm_direction_cosines(
    theta_rad: float, phi_rad: float, opening_rad: float = 0.5 * pi
) -> tuple[float, float]:
    """Return each arm's unit vector times the wave's direction of propagation.

    Parameters
    ----------
    theta_rad, phi_rad : float
        Polar angle and azimuth of the source [rad]; the wave runs away from it.
    opening_rad : float, default π/2
        Angle between the arms [rad]; their bisector stays at an azimuth of 45°.

    Returns
    -------
    tuple of float
        Direction cosines of the x and of the y arm.
    """
    x, y = _arm_azimuths(opening_rad)
    across = sin(theta_rad)
    return -across * cos(phi_rad - x), -across * cos(phi_rad - y)


def detector_response(
    frequency_hz: float,
    arm_length_m: float,
    theta_rad: float,
    phi_rad: float,
    psi_rad: float,
    opening_rad: float = 0.5 * pi,
) -> tuple[complex, complex]:
    """Return the response of the pair of arms at any frequency, direction and polarisation.

    Parameters
    ----------
    frequency_hz : float
        Frequency of the strain [Hz].
    arm_length_m : float
        Length of each arm [m].
    theta_rad, phi_rad : float
        Polar angle and azimuth of the source [rad].
    psi_rad : float
        Polarisation angle [rad].
    opening_rad : float, default π/2
        Angle between the arms [rad].

    Returns
    -------
    tuple of complex
        Plus and cross response; at frequency zero the antenna response.
    """
    cosines = arm_direction_cosines(theta_rad, phi_rad, opening_rad)
    plus = cross = complex(0.0, 0.0)
    for azimuth, cosine, sign in zip(_arm_azimuths(opening_rad), cosines, (0.5, -0.5)):  # noqa: B905  # MicroPython's zip takes no strict
        response = sign * arm_response(frequency_hz, arm_length_m, cosine)
        along_plus, along_cross = _stretch_along(azimuth, theta_rad, phi_rad, psi_rad)
        plus += response * along_plus
        cross += response * along_cross
    return plus, cross


def _arm_azimuths(opening_rad: float) -> tuple[float, float]:
    return 0.25 * pi - 0.5 * opening_rad, 0.25 * pi + 0.5 * opening_rad


def _stretch_along(
    azimuth_rad: float, theta_rad: float, phi_rad: float, psi_rad: float
) -> tuple[float, float]:
    """Return the unit plus and cross strain along a horizontal direction (u·e·u)."""
    turned = phi_rad - azimuth_rad
    towards = cos(theta_rad) * cos(turned)
    aside = sin(turned)
    even = towards * towards - aside * aside
    odd = 2.0 * towards * aside
    c, s = cos(2.0 * psi_rad), sin(2.0 * psi_rad)
    return even * c - odd * s, even * s + odd * c
