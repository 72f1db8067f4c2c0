"""The keys of ``bench.toml``: section, key, what kind of value, in which unit, within which range."""

from typing import NamedTuple

__all__ = ["KEYS", "LINE_KEYS", "MOTION_KEYS", "OPTIONS", "Key"]


class Key(NamedTuple):
    """One key of the bench file.

    Parameters
    ----------
    unit : str
        SI unit of the value; empty for text.
    example : str
        A value as the file would hold it.
    minimum, maximum : float or None
        Closed bounds, in ``unit``.
    above : float or None
        Open lower bound, in ``unit``.
    choices : tuple of str
        The allowed texts of a text key; empty where any text goes.
    whole : bool
        Whether the value must be a whole number.
    """

    unit: str
    example: str
    minimum: float | None = None
    maximum: float | None = None
    above: float | None = None
    choices: tuple[str, ...] = ()
    whole: bool = False


def _positive(unit: str, example: str) -> Key:
    return Key(unit, example, above=0.0)


def _not_negative(unit: str, example: str) -> Key:
    return Key(unit, example, minimum=0.0)


def _fraction(example: str) -> Key:
    return Key("1", example, maximum=1.0, above=0.0)


KEYS: dict[str, Key] = {
    "laser.wavelength": _positive("m", "632.99 nm"),
    "laser.power": _positive("W", "80 uW"),
    "laser.source": Key("", "wavemeter, 2024-03-01"),
    "laser.relative_intensity_noise": _not_negative("1/Hz**0.5", "1e-7 /√Hz"),
    "laser.linewidth": _not_negative("Hz", "1 MHz"),
    "laser.frequency_noise": _not_negative("Hz/Hz**0.5", "1 kHz/√Hz"),
    "arms.length": _positive("m", "0.5 m"),
    "arms.round_trips": Key("1", "1", minimum=1.0, whole=True),
    "arms.contrast": _fraction("0.95"),
    "arms.mismatch": Key("m", "2 mm"),
    "arms.input_reflectance": _fraction("0.97"),
    "arms.end_reflectance": _fraction("0.9999"),
    "arms.beam_offset": Key("m", "0.3 mm"),
    "arms.tilt_noise": _not_negative("rad/Hz**0.5", "1 nrad/√Hz"),
    "arms.opening_angle": Key("rad", "90 deg", above=0.0, maximum=3.1415926535897931),
    "air.temperature": Key("K", "20 degC", above=0.0),
    "air.pressure": _positive("Pa", "101325 Pa"),
    "air.humidity": Key("1", "50%", minimum=0.0, maximum=1.0),
    "air.co2": Key("1", "450 umol/mol", minimum=0.0, maximum=1.0),
    "air.equation": Key("", "ciddor", choices=("ciddor", "edlen", "edlen1994")),
    "air.medium": Key("", "vacuum", choices=("vacuum", "air")),
    "air.common_noise": _not_negative("1/Hz**0.5", "1e-9 /√Hz"),
    "air.differential_noise": _not_negative("1/Hz**0.5", "1e-11 /√Hz"),
    "air.index": Key("1", "1.00027", minimum=1.0, maximum=1.01),
    "photodiode.responsivity": _positive("A/W", "0.4 A/W"),
    "photodiode.quantum_efficiency": _fraction("0.8"),
    "photodiode.transimpedance": _positive("V/A", "20 kohm"),
    "photodiode.bandwidth": _positive("Hz", "100 kHz"),
    "photodiode.amplifier_voltage_noise": _not_negative("V/Hz**0.5", "5 nV/√Hz"),
    "photodiode.amplifier_current_noise": _not_negative("A/Hz**0.5", "10 fA/√Hz"),
    "photodiode.capacitance": _not_negative("F", "100 pF"),
    "photodiode.dark": Key("V", "1 mV"),
    "adc.bits": Key("1", "16", minimum=1.0, maximum=32.0, whole=True),
    "adc.range": _positive("V", "3.3 V"),
    "adc.offset": Key("V", "0 V"),
    "adc.rate": _positive("Hz", "10 kHz"),
    "adc.effective_bits": Key("1", "13.5", above=0.0, maximum=32.0),
    "adc.noise": _not_negative("V", "0.2 mV"),  # rms, inputs shorted
    "adc.reference": Key("1", '{ value = 0, u = "0.15%" }', minimum=-0.5, maximum=0.5),
    "adc.quadratic": Key("1", "{ value = 0, u = 2e-5 }", minimum=-0.5, maximum=0.5),
    "adc.cubic": Key("1", "{ value = 0, u = 2e-5 }", minimum=-0.5, maximum=0.5),
    "adc.antialias": _positive("Hz", "4 kHz"),
    "adc.aperture": _not_negative("s", "10 us"),
    "adc.channel_delay": Key("s", "5 us"),
    "adc.clock": Key("1", '{ value = 0, u = "20 ppm" }', minimum=-0.5, maximum=0.5),
    "actuator.arm": Key("", "x", choices=("x", "y")),
    "actuator.polarity": Key("1", "1", minimum=-1.0, maximum=1.0, whole=True),
    "actuator.drive_limit": _positive("V", "5 V"),
    "actuator.tilt": Key("1/V", '{ value = "0 1/V", u = "2e-4 1/V" }'),
    "actuator.gain": Key("m/V", "35 nm/V"),
    "actuator.resonance": _positive("Hz", "2 kHz"),
    "actuator.q": _positive("1", "30"),
    "actuator.bias": Key("V", "75 V"),
    "actuator.history": Key("", "poled upwards; swept -20 V to 120 V three times before"),
    "actuator.reproducibility": Key("1", '{ value = 0, u = "0.1%" }', minimum=-0.5, maximum=0.5),
    "drive.point": Key(
        "",
        "actuator terminals",
        choices=("actuator terminals", "amplifier input", "generator setting"),
    ),
    "drive.reading": Key("", "peak", choices=("peak", "peak-to-peak", "rms")),
    "drive.assumed_load": _positive("ohm", "50 ohm"),
    "drive.load": _positive("ohm", "1 Mohm"),
    "drive.divider": _positive("1", "1"),
    "drive.amplifier_gain": Key("1", "10"),
    "drive.channel": Key("", "drive"),
    "drive.pickup": Key("1", "{ value = 0, u = 0.001 }"),
    "fringe.low": Key("V", "0.44 V"),
    "fringe.high": Key("V", "9.69 V"),
    "fringe.drift": Key("1", '{ value = 0, u = "0.03%" }'),
    "mains.frequency": Key("Hz", "50 Hz", minimum=40.0, maximum=70.0),
    "mains.pickup": _not_negative("V", "0.1 mV"),  # on the photodiode channel, zero to peak
}
"""Every key but those of ``[[line]]`` and ``[[motion]]``, as ``section.key``."""

LINE_KEYS: dict[str, Key] = {
    "frequency": _positive("Hz", "87.1 Hz"),
    "drive": _positive("V", "0.5 V"),
}
"""The keys of one ``[[line]]``."""

MOTION_KEYS: dict[str, Key] = {
    "frequency": _positive("Hz", "31.7 Hz"),
    "density": _not_negative("m/Hz**0.5", "40 pm/√Hz"),
}
"""The keys of one ``[[motion]]``."""

OPTIONS: dict[str, str] = {
    "arm": "arms.length",
    "wavelength": "laser.wavelength",
    "round-trips": "arms.round_trips",
    "contrast": "arms.contrast",
    "power": "laser.power",
    "responsivity": "photodiode.responsivity",
    "quantum-efficiency": "photodiode.quantum_efficiency",
    "transimpedance": "photodiode.transimpedance",
    "adc-bits": "adc.bits",
    "adc-range": "adc.range",
    "temperature": "air.temperature",
    "pressure": "air.pressure",
    "humidity": "air.humidity",
    "low": "fringe.low",
    "high": "fringe.high",
}
"""The command-line option that overrides each of these keys."""
