"""Optical power to current, voltage and counts, with what bandwidth takes away.

The products take arrays as well as floats.
"""

from math import atan, cos, floor, pi, sin, sqrt

from .arms import sinc
from .constants import ELEMENTARY_CHARGE_C, PLANCK_J_S, SPEED_OF_LIGHT_M_S

__all__ = [
    "adc_code",
    "aperture_response",
    "counts",
    "current_a",
    "delay_response",
    "full_scale_snr_db",
    "one_pole_response",
    "quantum_efficiency",
    "responsivity_a_w",
    "step_v",
    "voltage_v",
]


def responsivity_a_w(quantum_efficiency: float, wavelength_m: float) -> float:
    """Return the responsivity of a photodiode, ηeλ/(hc).

    Parameters
    ----------
    quantum_efficiency : float
        Electrons per photon η, a fraction.
    wavelength_m : float
        Vacuum wavelength [m].

    Returns
    -------
    float
        Responsivity [A/W].
    """
    photon_j_m = PLANCK_J_S * SPEED_OF_LIGHT_M_S
    return quantum_efficiency * wavelength_m * (ELEMENTARY_CHARGE_C / photon_j_m)


def quantum_efficiency(responsivity_a_w: float, wavelength_m: float) -> float:
    """Return the quantum efficiency that a responsivity means.

    Parameters
    ----------
    responsivity_a_w : float
        Responsivity [A/W].
    wavelength_m : float
        Vacuum wavelength [m].

    Returns
    -------
    float
        Electrons per photon, a fraction; above 1 something is wrong or amplifies.
    """
    photon_j_m = PLANCK_J_S * SPEED_OF_LIGHT_M_S
    return responsivity_a_w / (wavelength_m * (ELEMENTARY_CHARGE_C / photon_j_m))


def current_a(power_w: float, responsivity_a_w: float) -> float:
    """Return the photocurrent.

    Parameters
    ----------
    power_w : float
        Power on the photodiode [W].
    responsivity_a_w : float
        Responsivity [A/W].

    Returns
    -------
    float
        Current [A].
    """
    return power_w * responsivity_a_w


def voltage_v(current_a: float, transimpedance_ohm: float) -> float:
    """Return the amplifier's voltage at low frequency.

    Parameters
    ----------
    current_a : float
        Photocurrent [A].
    transimpedance_ohm : float
        Transimpedance [Ω]; negative if the amplifier inverts.

    Returns
    -------
    float
        Voltage [V].
    """
    return current_a * transimpedance_ohm


def step_v(range_v: float, bits: float) -> float:
    """Return the voltage of one count, range/2^bits.

    Parameters
    ----------
    range_v : float
        Full scale from the lowest to the highest code [V].
    bits : float
        Resolution [bit].

    Returns
    -------
    float
        Volts per count.
    """
    codes: float = 2.0**bits
    return range_v / codes


def counts(voltage_v: float, range_v: float, bits: float, offset_v: float = 0.0) -> float:
    """Return the reading of an ideal converter, not yet rounded.

    Parameters
    ----------
    voltage_v : float
        Voltage [V].
    range_v : float
        Full scale [V].
    bits : float
        Resolution [bit].
    offset_v : float, default 0
        Voltage that reads 0 [V].

    Returns
    -------
    float
        Counts.
    """
    return (voltage_v - offset_v) / step_v(range_v, bits)


def adc_code(
    voltage_v: float, range_v: float, bits: int, offset_v: float = 0.0, signed: bool = True
) -> tuple[int, bool]:
    """Return the code of an ideal converter, and whether the voltage is out of its range.

    Parameters
    ----------
    voltage_v : float
        Voltage [V].
    range_v : float
        Full scale [V].
    bits : int
        Resolution [bit].
    offset_v : float, default 0
        Voltage that reads 0 [V].
    signed : bool, default True
        Codes from −2^(bits−1) to 2^(bits−1) − 1; otherwise from 0 to 2^bits − 1.

    Returns
    -------
    tuple of (int, bool)
        Code, rounded to the nearest and kept to the extremes; whether an extreme code was reached,
        at which a voltage is no longer known.
    """
    lowest = -(2 ** (bits - 1)) if signed else 0
    highest = lowest + 2**bits - 1
    code = floor(counts(voltage_v, range_v, bits, offset_v) + 0.5)
    code = min(max(code, lowest), highest)
    return code, code in (lowest, highest)


def full_scale_snr_db(bits: float) -> float:
    """Return a full-scale sine over the quantisation noise of an ideal converter.

    Parameters
    ----------
    bits : float
        Resolution [bit].

    Returns
    -------
    float
        Ratio [dB]: 20·bits·lg 2 + 10·lg 1.5, the trade's 6.02·bits + 1.76.
    """
    return 6.020599913279624 * bits + 1.7609125905568124


def one_pole_response(frequency_hz: float, corner_hz: float) -> complex:
    """Return the response of one pole, 1/(1 + if/f₀): a transimpedance amplifier or an RC filter.

    Parameters
    ----------
    frequency_hz : float
        Frequency [Hz].
    corner_hz : float
        −3 dB frequency f₀ [Hz].

    Returns
    -------
    complex
        Response, 1 at frequency zero.
    """
    ratio = frequency_hz / corner_hz
    size = 1.0 / sqrt(1.0 + ratio * ratio)
    lag = atan(ratio)
    return complex(size * cos(lag), -size * sin(lag))


def aperture_response(frequency_hz: float, aperture_s: float) -> complex:
    """Return the response of a converter that averages over a time before it reads.

    Parameters
    ----------
    frequency_hz : float
        Frequency [Hz].
    aperture_s : float
        Averaging time [s]; the stamp stands at its end.

    Returns
    -------
    complex
        sinc(πfτ)·exp(−iπfτ).
    """
    half = pi * frequency_hz * aperture_s
    size = sinc(half)
    return complex(size * cos(half), -size * sin(half))


def delay_response(frequency_hz: float, delay_s: float) -> complex:
    """Return the response of a pure delay, exp(−2πifτ).

    Parameters
    ----------
    frequency_hz : float
        Frequency [Hz].
    delay_s : float
        Delay [s].

    Returns
    -------
    complex
        Response of size 1.
    """
    angle = 2.0 * pi * frequency_hz * delay_s
    return complex(cos(angle), -sin(angle))
