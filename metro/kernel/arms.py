"""Response of arms that light needs time to cross.

While light runs along an arm and back the strain goes on changing. The complex response is 1 at
frequency zero and multiplies strain times length; its phase counts from the light's return to the
beam splitter.

References
----------
R. Schilling, Class. Quantum Grav. 14 (1997) 1513; M. Rakhmanov, J. D. Romano and J. T. Whelan,
Class. Quantum Grav. 25 (2008) 184017; the form below is integrated from the null ray.
"""

from math import cos, pi, sin

from .constants import SPEED_OF_LIGHT_M_S

__all__ = ["arm_response", "null_frequency_hz", "sinc"]


def sinc(x: float) -> float:
    """Return sin(x)/x, and 1 at x = 0.

    Parameters
    ----------
    x : float
        Argument [rad].

    Returns
    -------
    float
        sin(x)/x.
    """
    # below 1e-8 the next term, x²/6, is under half a unit in the last place of 1
    return sin(x) / x if abs(x) > 1e-8 else 1.0


def arm_response(
    frequency_hz: float, arm_length_m: float, direction_cosine: float = 0.0
) -> complex:
    """Return the round-trip response of an arm to a plane wave of strain.

    Parameters
    ----------
    frequency_hz : float
        Frequency of the strain [Hz].
    arm_length_m : float
        Arm length [m].
    direction_cosine : float, default 0
        Arm unit vector times the wave's direction of propagation, −1 … 1; 0 is normal incidence.

    Returns
    -------
    complex
        Response relative to frequency zero; at normal incidence sinc(2πfL/c)·exp(−2πifL/c).

    Notes
    -----
    With T = L/c, ω = 2πf and a the direction cosine, the way out and the way back give
    ½[exp(−iωT(3+a)/2)·sinc(ωT(1−a)/2) + exp(−iωT(1+a)/2)·sinc(ωT(1+a)/2)], where sinc x = sin x / x.
    Only at normal incidence does it vanish at c/(2L).
    """
    half = pi * frequency_hz * arm_length_m / SPEED_OF_LIGHT_M_S
    out = 0.5 * sinc(half * (1.0 - direction_cosine))
    back = 0.5 * sinc(half * (1.0 + direction_cosine))
    out_phase = half * (3.0 + direction_cosine)
    back_phase = half * (1.0 + direction_cosine)
    real = out * cos(out_phase) + back * cos(back_phase)
    imaginary = out * sin(out_phase) + back * sin(back_phase)
    return complex(real, -imaginary)


def null_frequency_hz(arm_length_m: float) -> float:
    """Return the lowest frequency at which an arm is blind at normal incidence, c/(2L).

    Parameters
    ----------
    arm_length_m : float
        Arm length [m].

    Returns
    -------
    float
        Frequency [Hz].
    """
    return 0.5 * SPEED_OF_LIGHT_M_S / arm_length_m
