"""Noise of light, resistors and converters, as one-sided amplitude densities.

References
----------
W. Schottky, Ann. Phys. 362 (1918) 541 (shot noise); J. B. Johnson and H. Nyquist, Phys. Rev. 32
(1928) 97 and 110 (thermal noise); W. R. Bennett, Bell Syst. Tech. J. 27 (1948) 446 (quantisation).
"""

from math import sqrt

from .constants import BOLTZMANN_J_K, ELEMENTARY_CHARGE_C

__all__ = [
    "LEAST_SNR",
    "averaging_time_s",
    "effective_noise_v",
    "johnson_current",
    "johnson_voltage",
    "quantisation_density",
    "quantisation_v",
    "root_sum",
    "shot_current",
    "signal_to_noise",
]

LEAST_SNR = 5.0  # below, a line cannot be told from the largest of a hundred noise bins


def shot_current(current_a: float) -> float:
    """Return the shot noise of a current, √(2eI).

    Parameters
    ----------
    current_a : float
        Mean current [A].

    Returns
    -------
    float
        Density [A/√Hz].
    """
    return sqrt(2.0 * ELEMENTARY_CHARGE_C * current_a)


def johnson_voltage(resistance_ohm: float, temperature_k: float) -> float:
    """Return the thermal noise voltage of a resistor, √(4kTR).

    Parameters
    ----------
    resistance_ohm : float
        Resistance [Ω].
    temperature_k : float
        Temperature [K].

    Returns
    -------
    float
        Density [V/√Hz].
    """
    return sqrt(4.0 * BOLTZMANN_J_K * temperature_k * resistance_ohm)


def johnson_current(resistance_ohm: float, temperature_k: float) -> float:
    """Return the thermal noise current of a resistor, √(4kT/R).

    Parameters
    ----------
    resistance_ohm : float
        Resistance [Ω].
    temperature_k : float
        Temperature [K].

    Returns
    -------
    float
        Density [A/√Hz].
    """
    return sqrt(4.0 * BOLTZMANN_J_K * temperature_k / resistance_ohm)


def quantisation_v(step_v: float) -> float:
    """Return the quantisation noise of an ideal converter, q/√12.

    Parameters
    ----------
    step_v : float
        Volts per count q.

    Returns
    -------
    float
        Root-mean-square noise [V]; right only if the input moves by about a count or more.
    """
    return step_v / sqrt(12.0)


def quantisation_density(noise_v: float, rate_hz: float) -> float:
    """Return the density of noise spread evenly up to half the sampling rate.

    Parameters
    ----------
    noise_v : float
        Root-mean-square noise [V].
    rate_hz : float
        Sampling rate [Hz].

    Returns
    -------
    float
        Density [V/√Hz].
    """
    return noise_v / sqrt(0.5 * rate_hz)


def effective_noise_v(range_v: float, effective_bits: float) -> float:
    """Return the noise of a converter from its effective number of bits.

    Parameters
    ----------
    range_v : float
        Full scale [V].
    effective_bits : float
        Effective number of bits, distortion included.

    Returns
    -------
    float
        Root-mean-square noise [V], range/(2^ENOB·√12).

    References
    ----------
    IEEE Std 1241-2010, *Terminology and Test Methods for Analog-to-Digital Converters*,
    effective number of bits (from memory).
    """
    codes: float = 2.0**effective_bits
    return range_v / (codes * sqrt(12.0))


def root_sum(densities: list[float]) -> float:
    """Return independent densities added in power.

    Parameters
    ----------
    densities : list of float
        Amplitude densities in one unit.

    Returns
    -------
    float
        Total in the same unit.
    """
    largest = max(densities) if densities else 0.0
    if largest == 0.0:
        return 0.0
    # scaled, because the square of 1e-200 is zero
    return largest * sqrt(sum([(d / largest) * (d / largest) for d in densities]))


def signal_to_noise(amplitude: float, density: float, duration_s: float) -> float:
    """Return amplitude over noise after averaging, A/√(S/T).

    Parameters
    ----------
    amplitude : float
        Amplitude of the line, zero to peak.
    density : float
        Amplitude density beside it, in the unit of the amplitude per √Hz.
    duration_s : float
        Time averaged [s].

    Returns
    -------
    float
        Signal-to-noise ratio.
    """
    return abs(amplitude) * sqrt(duration_s) / density


def averaging_time_s(amplitude: float, density: float, ratio: float) -> float:
    """Return the time after which a line reaches a signal-to-noise ratio.

    Parameters
    ----------
    amplitude : float
        Amplitude of the line, zero to peak; not 0.
    density : float
        Amplitude density beside it, in the unit of the amplitude per √Hz.
    ratio : float
        Wanted A/√(S/T).

    Returns
    -------
    float
        Time [s].
    """
    root = ratio * density / amplitude
    return root * root
