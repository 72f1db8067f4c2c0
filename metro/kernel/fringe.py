"""The fringe law and its inverse: phase to the detector's voltage, and back on a named slope.

The functions that take a cosine or a sine already taken accept arrays as well as floats; the
others have their array twins in ``metro.fringe_arrays``.
"""

from math import atan2, cos, sin, sqrt

__all__ = [
    "phase_change",
    "phase_of_voltage",
    "signal_change",
    "voltage",
    "voltage_of_cosine",
    "voltage_slope",
    "voltage_slope_of_sine",
]


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
