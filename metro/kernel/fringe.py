"""Displacement to phase, phase to the detector's voltage, and back.

The functions made of products and quotients alone take arrays as well as floats; those that
need a cosine or a square root have their array twins in ``metro.fringe``.
"""

from math import atan2, cos, exp, pi, sin, sqrt

from .bessel import bessel, jinc

__all__ = [
    "contrast",
    "contrast_of_powers",
    "displacement_m",
    "fringes",
    "harmonic_amplitude",
    "line_responses",
    "phase_change",
    "phase_of_voltage",
    "phase_per_metre",
    "phase_rad",
    "power_w",
    "signal_change",
    "voltage",
    "voltage_of_cosine",
    "voltage_slope",
    "voltage_slope_of_sine",
]


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


def voltage_of_cosine(cosine: float, low: float, high: float) -> float:
    """Return the fringe law for a cosine already taken, (high+low)/2 + (high−low)/2·cos φ.

    Parameters
    ----------
    cosine : float
        cos φ, φ = 0 at this detector's maximum.
    low, high : float
        Extremes of the fringe, in volts or any linear unit.

    Returns
    -------
    float
        Detector signal in the unit of the extremes.
    """
    return 0.5 * (high + low) + 0.5 * (high - low) * cosine


def voltage(phase_rad: float, low: float, high: float) -> float:
    """Return the detector signal at a phase.

    Parameters
    ----------
    phase_rad : float
        Phase [rad], 0 at this detector's maximum.
    low, high : float
        Extremes of the fringe, in volts or any linear unit.

    Returns
    -------
    float
        Detector signal in the unit of the extremes.
    """
    return voltage_of_cosine(cos(phase_rad), low, high)


def voltage_slope_of_sine(sine: float, low: float, high: float) -> float:
    """Return the slope of the fringe law for a sine already taken, −(high−low)/2·sin φ.

    Parameters
    ----------
    sine : float
        sin φ, φ = 0 at this detector's maximum.
    low, high : float
        Extremes of the fringe.

    Returns
    -------
    float
        Slope in the unit of the extremes per radian.
    """
    return -0.5 * (high - low) * sine


def voltage_slope(phase_rad: float, low: float, high: float) -> float:
    """Return the slope of the fringe law at a phase.

    Parameters
    ----------
    phase_rad : float
        Phase [rad], 0 at this detector's maximum.
    low, high : float
        Extremes of the fringe.

    Returns
    -------
    float
        Slope in the unit of the extremes per radian; positive on the rising slope.
    """
    return voltage_slope_of_sine(sin(phase_rad), low, high)


def phase_of_voltage(signal: float, low: float, high: float, rising: bool = True) -> float:
    """Return the phase at which the detector shows a signal, on a named slope.

    Parameters
    ----------
    signal : float
        Detector signal, from ``low`` to ``high``.
    low, high : float
        Extremes of the fringe, in the same unit.
    rising : bool, default True
        Slope: on the rising one the phase lies in −π … 0, on the falling one in 0 … π.

    Returns
    -------
    float
        Phase [rad].

    Raises
    ------
    ValueError
        If the signal lies outside the extremes.

    Notes
    -----
    tan²(φ/2) = (high − V)/(V − low) keeps its digits near the extremes, where an arc cosine
    loses half of them.
    """
    if not low <= signal <= high:
        raise ValueError(f"signal must lie between the extremes {low} and {high}, got {signal}")
    phase = 2.0 * atan2(sqrt(high - signal), sqrt(signal - low))
    return -phase if rising else phase


def signal_change(phase_change_rad: float, working_phase_rad: float) -> float:
    """Return the change of the fringe law over half its height, cos(φ0+δ) − cos φ0.

    Parameters
    ----------
    phase_change_rad : float
        Change δ of the phase from the working point [rad], however large.
    working_phase_rad : float
        Phase φ0 of the working point [rad].

    Returns
    -------
    float
        Change in units of (high−low)/2.

    Notes
    -----
    Written −2 sin(φ0 + δ/2) sin(δ/2), which keeps the digits of the smallest δ.
    """
    half = 0.5 * phase_change_rad
    return -2.0 * sin(working_phase_rad + half) * sin(half)


def phase_change(signal_change: float, working_phase_rad: float) -> float:
    """Return the phase change behind a change of the fringe law, on the working point's slope.

    Parameters
    ----------
    signal_change : float
        Change u in units of (high−low)/2; cos φ0 + u within −1 … 1.
    working_phase_rad : float
        Phase φ0 of the working point [rad]; its slope, rising or falling, is the branch.

    Returns
    -------
    float
        Change δ of the phase [rad].

    Raises
    ------
    ValueError
        If the signal would lie outside the extremes.

    Notes
    -----
    With s = cos φ0, c = |sin φ0|, v = s + u and w = √(1 − v²): sin δ = uc + su(2s+u)/(c+w) on the
    rising slope, in which nothing cancels for small u, and cos δ = cw + sv.
    """
    s, c = cos(working_phase_rad), sin(working_phase_rad)
    v = s + signal_change
    if not -1.0 <= v <= 1.0:
        raise ValueError(f"signal must stay within the extremes, -1 … 1, got {v}")
    size, w = abs(c), sqrt((1.0 - v) * (1.0 + v))
    if size + w == 0.0:
        return 0.0  # on an extreme, and no change
    sine = signal_change * (size + s * (2.0 * s + signal_change) / (size + w))
    change = atan2(sine, size * w + s * v)
    return change if c < 0.0 else -change


def power_w(phase_rad: float, mean_power_w: float, contrast: float) -> float:
    """Return the power on the detector at a phase.

    Parameters
    ----------
    phase_rad : float
        Phase [rad], 0 at this detector's maximum; add π for the antiphase port.
    mean_power_w : float
        Mean power of the fringe on this detector [W].
    contrast : float
        Contrast, 0 … 1.

    Returns
    -------
    float
        Power [W].
    """
    return mean_power_w * (1.0 + contrast * cos(phase_rad))


def contrast(low: float, high: float, dark: float = 0.0) -> float:
    """Return the contrast of a fringe, (high − low)/(high + low − 2·dark).

    Parameters
    ----------
    low, high : float
        Extremes of the fringe.
    dark : float, default 0
        Signal without light, in the same unit.

    Returns
    -------
    float
        Contrast.
    """
    return (high - low) / (high + low - 2.0 * dark)


def contrast_of_powers(first: float, second: float) -> float:
    """Return the contrast that two beams can reach, 2√(I₁I₂)/(I₁+I₂).

    Parameters
    ----------
    first, second : float
        Signals of each arm alone, dark subtracted, in the same unit.

    Returns
    -------
    float
        Contrast; less is seen where the beams do not overlap or are not coherent.

    References
    ----------
    BIPM, *Mise en pratique for the definition of the metre in the SI*, 2019.
    """
    return 2.0 * sqrt(first * second) / (first + second)


def line_responses(
    depths_rad: list[float], working_phase_rad: float, background_rad: float = 0.0
) -> list[float]:
    """Return what is left of each line's small-signal response when all move at once.

    Parameters
    ----------
    depths_rad : list of float
        Phase amplitude m_i of each line [rad].
    working_phase_rad : float
        Mean phase φ0 [rad].
    background_rad : float, default 0
        Root-mean-square σφ of all other phase motion [rad], taken as Gaussian.

    Returns
    -------
    list of float
        S_i = sin φ0 · 2J1(m_i)/m_i · Π_{j≠i} J0(m_j) · exp(−σφ²/2): the signal at line i is
        −(high−low)/2 · S_i · m_i.

    Notes
    -----
    The frequencies must not be harmonics or sums of each other.
    """
    common = sin(working_phase_rad) * exp(-0.5 * background_rad * background_rad)
    zeroth = [bessel(0, m) for m in depths_rad]
    responses = []
    for i, depth in enumerate(depths_rad):
        left = common * jinc(depth)
        for j, other in enumerate(zeroth):
            if j != i:
                left *= other
        responses.append(left)
    return responses


def harmonic_amplitude(order: int, depth_rad: float, working_phase_rad: float) -> float:
    """Return a harmonic of a sinusoidally driven fringe, over half the fringe's height.

    Parameters
    ----------
    order : int
        Harmonic, 1 or above; 1 is the line itself.
    depth_rad : float
        Phase amplitude m of the line [rad].
    working_phase_rad : float
        Mean phase φ0 [rad].

    Returns
    -------
    float
        Amplitude of harmonic n for a drive m·cos ωt: 2·J_n(m) times ±sin φ0 (odd n) or
        ±cos φ0 (even n), with the sign of its cosine.

    References
    ----------
    Abramowitz and Stegun 9.1.42 to 9.1.45.
    """
    sign = -1.0 if (order + 1) // 2 % 2 else 1.0
    quadrature = sin(working_phase_rad) if order % 2 else cos(working_phase_rad)
    return 2.0 * sign * bessel(order, depth_rad) * quadrature
