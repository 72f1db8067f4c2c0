"""Arms in which light goes up and down many times: folded arms and Fabry–Perot arms.

Both multiply the phase of a displacement, and both answer late: what the light collects on its
last trip is newer than what it collected on its first.

References
----------
P. R. Saulson, *Fundamentals of Interferometric Gravitational Wave Detectors*, World Scientific
1994, chapter 6 (delay lines and Fabry–Perot cavities; from memory). The formulas below are derived
from the sum over the trips.
"""

from math import asin, cos, pi, sin, sqrt

from .constants import SPEED_OF_LIGHT_M_S

__all__ = [
    "cavity_pole_hz",
    "cavity_response",
    "finesse",
    "folded_response",
    "phase_gain",
    "resonance_reflectance",
]


def folded_response(frequency_hz: float, arm_length_m: float, round_trips: int) -> complex:
    """Return what the later trips of a folded arm add, relative to frequency zero.

    Parameters
    ----------
    frequency_hz : float
        Frequency [Hz].
    arm_length_m : float
        Length of the arm [m].
    round_trips : int
        Round trips N of the light in the arm.

    Returns
    -------
    complex
        (1/N)·Σ exp(−4πifLk/c), k = 0 … N−1; the response of one trip multiplies it.
    """
    step = 4.0 * pi * frequency_hz * arm_length_m / SPEED_OF_LIGHT_M_S
    real = imaginary = 0.0
    for k in range(round_trips):
        real += cos(k * step)
        imaginary += sin(k * step)
    return complex(real / round_trips, -imaginary / round_trips)


def phase_gain(input_reflectance: float, end_reflectance: float = 1.0) -> float:
    """Return by how much a Fabry–Perot arm on resonance multiplies the phase of one round trip.

    Parameters
    ----------
    input_reflectance : float
        Power reflectance R₁ of the mirror that couples the light in, 0 … 1; below the other one.
    end_reflectance : float, default 1
        Power reflectance R₂ of the end mirror.

    Returns
    -------
    float
        Slope of the reflected light's phase by the round-trip phase,
        (1−R₁)·r₂/((1−r₁r₂)(r₂−r₁)) with r = √R; (1+r₁)/(1−r₁) for a perfect end mirror. It holds while
        the round-trip phase stays far below the width of the resonance.

    Raises
    ------
    ValueError
        If the input mirror reflects as much as the end mirror or more: then the phase of the
        reflected light does not follow the length.
    """
    r1, r2 = sqrt(input_reflectance), sqrt(end_reflectance)
    if not 0.0 <= r1 < r2 <= 1.0:
        raise ValueError(
            "input_reflectance must be below end_reflectance, got "
            + repr(input_reflectance)
            + " and "
            + repr(end_reflectance)
        )
    return (1.0 - input_reflectance) * r2 / ((1.0 - r1 * r2) * (r2 - r1))


def resonance_reflectance(input_reflectance: float, end_reflectance: float = 1.0) -> float:
    """Return the power that a Fabry–Perot arm on resonance sends back.

    Parameters
    ----------
    input_reflectance, end_reflectance : float
        Power reflectances of the two mirrors.

    Returns
    -------
    float
        ((r₂−r₁)/(1−r₁r₂))², 1 for a perfect end mirror.
    """
    r1, r2 = sqrt(input_reflectance), sqrt(end_reflectance)
    amplitude = (r2 - r1) / (1.0 - r1 * r2)
    return amplitude * amplitude


def finesse(input_reflectance: float, end_reflectance: float = 1.0) -> float:
    """Return the finesse: free spectral range over the full width of the resonance.

    Parameters
    ----------
    input_reflectance, end_reflectance : float
        Power reflectances of the two mirrors.

    Returns
    -------
    float
        π/(2·asin((1−ρ)/(2√ρ))) with ρ = r₁r₂, which is near π√ρ/(1−ρ).

    Raises
    ------
    ValueError
        If the mirrors reflect so little that the resonance has no half height (ρ < 0.172).
    """
    rho = sqrt(input_reflectance * end_reflectance)
    half = (1.0 - rho) / (2.0 * sqrt(rho)) if rho > 0.0 else 2.0
    if half > 1.0:
        raise ValueError("the mirrors must reflect more for a resonance with a half width")
    return 0.5 * pi / asin(half)


def cavity_pole_hz(
    arm_length_m: float, input_reflectance: float, end_reflectance: float = 1.0
) -> float:
    """Return the frequency at which a Fabry–Perot arm's response has fallen by 3 dB.

    Parameters
    ----------
    arm_length_m : float
        Length of the arm [m].
    input_reflectance, end_reflectance : float
        Power reflectances of the two mirrors.

    Returns
    -------
    float
        Frequency [Hz]; half the full width of the resonance, c/(4LF).
    """
    return SPEED_OF_LIGHT_M_S / (4.0 * arm_length_m * finesse(input_reflectance, end_reflectance))


def cavity_response(
    frequency_hz: float,
    arm_length_m: float,
    input_reflectance: float,
    end_reflectance: float = 1.0,
) -> complex:
    """Return what storage in a Fabry–Perot arm on resonance leaves, relative to frequency zero.

    Parameters
    ----------
    frequency_hz : float
        Frequency [Hz].
    arm_length_m : float
        Length of the arm [m].
    input_reflectance, end_reflectance : float
        Power reflectances of the two mirrors.

    Returns
    -------
    complex
        (1−ρ)/(1−ρ·exp(−4πifL/c)) with ρ = r₁r₂; near one pole at :func:`cavity_pole_hz`. The response
        of one trip multiplies it.
    """
    rho = sqrt(input_reflectance * end_reflectance)
    step = 4.0 * pi * frequency_hz * arm_length_m / SPEED_OF_LIGHT_M_S
    real, imaginary = 1.0 - rho * cos(step), rho * sin(step)
    scale = (1.0 - rho) / (real * real + imaginary * imaginary)
    return complex(scale * real, -scale * imaginary)
