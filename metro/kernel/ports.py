"""More than one output: two antiphase ports, and two outputs in quadrature.

The functions made of products and quotients alone take arrays as well as floats.
"""

from math import atan2, cos, sin

__all__ = [
    "antiphase_powers",
    "cosine_of_ports",
    "quadrature_phase",
    "quadrature_signals",
]


def antiphase_powers(phase_rad: float, mean_power_w: float, contrast: float) -> tuple[float, float]:
    """Return the powers at the two ports of a lossless beam splitter.

    Parameters
    ----------
    phase_rad : float
        Phase [rad], 0 at the first port's maximum.
    mean_power_w : float
        Mean power of the fringe on each port [W].
    contrast : float
        Contrast, 0 … 1.

    Returns
    -------
    tuple of float
        Powers [W]; their sum does not depend on the phase.
    """
    swing = mean_power_w * contrast * cos(phase_rad)
    return mean_power_w + swing, mean_power_w - swing


def cosine_of_ports(first: float, second: float, contrast: float) -> float:
    """Return cos φ from two antiphase ports, whatever the laser's power.

    Parameters
    ----------
    first, second : float
        Signals of the two ports in one unit, dark subtracted and gains equal.
    contrast : float
        Contrast, 0 excluded.

    Returns
    -------
    float
        Difference over sum and contrast.
    """
    return (first - second) / (contrast * (first + second))


def quadrature_signals(
    phase_rad: float, amplitude: float, gain_ratio: float = 1.0, lag_rad: float = 0.0
) -> tuple[float, float]:
    """Return the two signals of a quadrature detector, offsets left out.

    Parameters
    ----------
    phase_rad : float
        Phase [rad].
    amplitude : float
        Amplitude of the first signal.
    gain_ratio : float, default 1
        Amplitude of the first signal over that of the second.
    lag_rad : float, default 0
        By how much the two are off a right angle [rad].

    Returns
    -------
    tuple of float
        A·cos φ and A·sin(φ − α)/r.

    References
    ----------
    P. L. M. Heydemann, Appl. Opt. 20 (1981) 3382 (from memory).
    """
    return amplitude * cos(phase_rad), amplitude * sin(phase_rad - lag_rad) / gain_ratio


def quadrature_phase(
    first: float, second: float, gain_ratio: float = 1.0, lag_rad: float = 0.0
) -> float:
    """Return the phase of a quadrature detector, offsets subtracted.

    Parameters
    ----------
    first, second : float
        The two signals in one unit.
    gain_ratio : float, default 1
        Amplitude of the first signal over that of the second.
    lag_rad : float, default 0
        By how much the two are off a right angle [rad].

    Returns
    -------
    float
        Phase [rad] in −π … π; unwrapping it is ambiguous where it moves by π between samples.
    """
    sine = (gain_ratio * second + first * sin(lag_rad)) / cos(lag_rad)
    return atan2(sine, first)
