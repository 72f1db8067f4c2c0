"""Wavelength and frequency of light in vacuum."""

from .constants import SPEED_OF_LIGHT_M_S

__all__ = ["optical_frequency_hz", "vacuum_wavelength_m"]


def vacuum_wavelength_m(frequency_hz: float) -> float:
    """Return the vacuum wavelength of light, c/f.

    Parameters
    ----------
    frequency_hz : float
        Optical frequency [Hz]; > 0.

    Returns
    -------
    float
        Wavelength [m].
    """
    return SPEED_OF_LIGHT_M_S / frequency_hz


def optical_frequency_hz(wavelength_m: float) -> float:
    """Return the frequency of light, c/λ.

    Parameters
    ----------
    wavelength_m : float
        Vacuum wavelength [m]; > 0.

    Returns
    -------
    float
        Frequency [Hz].
    """
    return SPEED_OF_LIGHT_M_S / wavelength_m
