"""Power on the detector and the contrast of a fringe."""

from math import cos, sqrt

__all__ = ["contrast", "contrast_of_powers", "power_w"]


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
