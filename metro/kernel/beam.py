"""What beams do to the fringe: coherence, tilt, offset, and a fringe that is no pure cosine."""

from math import cos, exp, pi, sin

from .constants import SPEED_OF_LIGHT_M_S

__all__ = [
    "coherence",
    "coherence_length_m",
    "real_fringe",
    "real_fringe_slope",
    "tilt_contrast",
    "tilt_displacement_m",
]


def coherence(path_difference_m: float, linewidth_hz: float) -> float:
    """Return the contrast that a laser of some linewidth leaves at a path difference.

    Parameters
    ----------
    path_difference_m : float
        Optical path difference of the two beams, in vacuum [m]: twice the arm mismatch for one round
        trip.
    linewidth_hz : float
        Full width at half maximum of a Lorentzian line [Hz].

    Returns
    -------
    float
        exp(−πΔν|τ|), 0 … 1, with τ the delay.

    References
    ----------
    J. W. Goodman, *Statistical Optics*, Wiley 1985, section 5.1.3 (from memory).
    """
    return exp(-pi * linewidth_hz * abs(path_difference_m) / SPEED_OF_LIGHT_M_S)


def coherence_length_m(linewidth_hz: float) -> float:
    """Return the path difference at which a Lorentzian line leaves 1/e of the contrast.

    Parameters
    ----------
    linewidth_hz : float
        Full width at half maximum [Hz].

    Returns
    -------
    float
        c/(πΔν) [m].
    """
    return SPEED_OF_LIGHT_M_S / (pi * linewidth_hz)


def tilt_displacement_m(tilt_rad: float, offset_m: float) -> float:
    """Return the displacement that a tilting mirror shows to a beam off its pivot.

    Parameters
    ----------
    tilt_rad : float
        Tilt of the mirror [rad], small.
    offset_m : float
        Distance of the beam from the pivot [m].

    Returns
    -------
    float
        Displacement [m].
    """
    return tilt_rad * offset_m


def tilt_contrast(tilt_rad: float, beam_radius_m: float, wavelength_m: float) -> float:
    """Return the contrast that a tilted mirror leaves between two equal Gaussian beams.

    Parameters
    ----------
    tilt_rad : float
        Tilt of one mirror [rad]; the beams then cross at twice that angle.
    beam_radius_m : float
        Radius at which the intensity has fallen to 1/e² [m].
    wavelength_m : float
        Wavelength [m].

    Returns
    -------
    float
        exp(−2(πwθ/λ)²): the overlap of the two fields, beams collimated and centred.
    """
    turns = pi * beam_radius_m * tilt_rad / wavelength_m
    return exp(-2.0 * turns * turns)


def real_fringe(
    phase_rad: float, low: float, high: float, harmonics: list[tuple[float, float]]
) -> float:
    """Return a fringe with harmonics, as ghost beams and saturation make them.

    Parameters
    ----------
    phase_rad : float
        Phase [rad].
    low, high : float
        Extremes of the fringe without its harmonics.
    harmonics : list of (float, float)
        Cosine and sine part of the second, third … harmonic of the phase, over half the fringe's
        height.

    Returns
    -------
    float
        Signal in the unit of the extremes.
    """
    half = 0.5 * (high - low)
    total = cos(phase_rad)
    order = 2
    for cosine, sine in harmonics:
        total += cosine * cos(order * phase_rad) + sine * sin(order * phase_rad)
        order += 1
    return 0.5 * (high + low) + half * total


def real_fringe_slope(
    phase_rad: float, low: float, high: float, harmonics: list[tuple[float, float]]
) -> float:
    """Return the slope of a fringe with harmonics.

    Parameters
    ----------
    phase_rad : float
        Phase [rad].
    low, high : float
        Extremes of the fringe without its harmonics.
    harmonics : list of (float, float)
        As for :func:`real_fringe`.

    Returns
    -------
    float
        Slope in the unit of the extremes per radian.
    """
    half = 0.5 * (high - low)
    total = -sin(phase_rad)
    order = 2
    for cosine, sine in harmonics:
        total += order * (sine * cos(order * phase_rad) - cosine * sin(order * phase_rad))
        order += 1
    return half * total
