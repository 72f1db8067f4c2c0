"""Every public function with every wrong dimension: one clear error that names the parameter."""

import inspect
import itertools

import pytest

import metro
import metro.units
from metro import air, beam, cavity, fringe, fringe_law, noise, photodiode, ports, strain

# a value of each dimension that a bench knows
SAMPLES = {
    "length": "0.5 m",
    "time": "10 s",
    "frequency": "87.1 Hz",
    "angle": "0.02 rad",
    "temperature": "293 K",
    "pressure": "101325 Pa",
    "power": "80 uW",
    "current": "50 uA",
    "voltage": "1.2 V",
    "resistance": "20 kohm",
    "responsivity": "0.4 A/W",
    "mass": "3 kg",
    "number": "0.5",
}
# function: its parameters with a valid value and the dimensions each takes
FUNCTIONS = {
    strain.arm_displacement: {"strain": ("1e-21", "number"), "arm_length": ("4 km", "length")},
    strain.arm_strain: {"displacement": ("1 pm", "length"), "arm_length": ("4 km", "length")},
    strain.one_arm_displacement: {
        "length_strain": ("1e-6", "number"),
        "arm_length": ("4 km", "length"),
    },
    strain.arm_response: {
        "frequency": ("1 kHz", "frequency"),
        "arm_length": ("4 km", "length"),
        "direction_cosine": ("0.3", "number"),
    },
    strain.antenna_response: {
        "theta": ("1 rad", "angle"),
        "phi": ("20 deg", "angle"),
        "psi": ("0.1 fringe", "angle"),
        "opening_angle": ("60 deg", "angle"),
    },
    fringe.phase: {
        "displacement": ("1 nm", "length"),
        "wavelength": ("633 nm", "length"),
        "index": ("1.0003", "number"),
        "round_trips": ("2", "number"),
    },
    fringe.fringes: {
        "displacement": ("1 nm", "length"),
        "wavelength": ("633 nm", "length"),
        "index": ("1.0003", "number"),
        "round_trips": ("2", "number"),
    },
    fringe.displacement: {
        "phase": ("1 rad", "angle"),
        "wavelength": ("633 nm", "length"),
        "index": ("1.0003", "number"),
        "round_trips": ("2", "number"),
    },
    fringe.vacuum_wavelength: {"frequency": ("473.6 THz", "frequency")},
    fringe_law.fringe_voltage: {
        "phase": ("1 rad", "angle"),
        "low": ("0.1 V", "voltage"),
        "high": ("2 V", "voltage"),
    },
    fringe_law.fringe_slope: {
        "phase": ("1 rad", "angle"),
        "low": ("0.1 V", "voltage"),
        "high": ("2 V", "voltage"),
    },
    fringe_law.phase_on_slope: {
        "voltage": ("1 V", "voltage"),
        "low": ("0.1 V", "voltage"),
        "high": ("2 V", "voltage"),
    },
    fringe_law.contrast: {
        "low": ("0.1 V", "voltage"),
        "high": ("2 V", "voltage"),
        "dark": ("10 mV", "voltage"),
    },
    fringe_law.line_responses: {
        "depths": ("0.2 rad", "angle"),
        "working_phase": ("80 deg", "angle"),
        "background": ("0.1 rad", "angle"),
    },
    cavity.phase_gain: {
        "input_reflectance": ("0.97", "number"),
        "end_reflectance": ("0.999", "number"),
    },
    cavity.finesse: {
        "input_reflectance": ("0.97", "number"),
        "end_reflectance": ("0.999", "number"),
    },
    cavity.cavity_pole: {
        "arm_length": ("4 km", "length"),
        "input_reflectance": ("0.97", "number"),
        "end_reflectance": ("0.999", "number"),
    },
    cavity.cavity_response: {
        "frequency": ("90 Hz", "frequency"),
        "arm_length": ("4 km", "length"),
        "input_reflectance": ("0.97", "number"),
        "end_reflectance": ("0.999", "number"),
    },
    ports.antiphase_powers: {
        "phase": ("1 rad", "angle"),
        "mean_power": ("80 uW", "power"),
        "contrast": ("0.9", "number"),
    },
    ports.quadrature_voltages: {
        "phase": ("1 rad", "angle"),
        "amplitude": ("2 V", "voltage"),
        "gain_ratio": ("1.1", "number"),
        "lag": ("2 deg", "angle"),
    },
    ports.quadrature_phase: {
        "first": ("1 V", "voltage"),
        "second": ("-0.3 V", "voltage"),
        "gain_ratio": ("1.1", "number"),
        "lag": ("2 deg", "angle"),
    },
    beam.coherence: {"path_difference": ("4 cm", "length"), "linewidth": ("1 MHz", "frequency")},
    beam.coherence_length: {"linewidth": ("1 MHz", "frequency")},
    beam.tilt_displacement: {"tilt": ("1 urad", "angle"), "beam_offset": ("0.3 mm", "length")},
    beam.tilt_contrast: {
        "tilt": ("40 urad", "angle"),
        "beam_radius": ("1 mm", "length"),
        "wavelength": ("633 nm", "length"),
    },
    photodiode.responsivity: {
        "quantum_efficiency": ("0.8", "number"),
        "wavelength": ("633 nm", "length"),
    },
    photodiode.quantum_efficiency: {
        "responsivity": ("0.4 A/W", "responsivity"),
        "wavelength": ("633 nm", "length"),
    },
    photodiode.photocurrent: {
        "power": ("1 mW", "power"),
        "responsivity": ("0.4 A/W", "responsivity"),
    },
    photodiode.voltage: {
        "current": ("1 uA", "current"),
        "transimpedance": ("20 kohm", "resistance"),
    },
    photodiode.adc_step: {"adc_range": ("5 V", "voltage"), "bits": ("12", "number")},
    photodiode.adc_counts: {
        "voltage": ("1 V", "voltage"),
        "adc_range": ("5 V", "voltage"),
        "bits": ("12", "number"),
        "offset": ("0 V", "voltage"),
    },
    photodiode.adc_codes: {
        "voltage": ("1 V", "voltage"),
        "adc_range": ("5 V", "voltage"),
        "bits": ("12", "number"),
        "offset": ("0 V", "voltage"),
    },
    noise.shot_current: {"current": ("1 mA", "current")},
    noise.johnson_voltage: {
        "resistance": ("1 kohm", "resistance"),
        "temperature": ("20 degC", "temperature"),
    },
    noise.johnson_current: {
        "resistance": ("1 kohm", "resistance"),
        "temperature": ("300 K", "temperature"),
    },
    noise.quantisation_noise: {"adc_range": ("5 V", "voltage"), "bits": ("12", "number")},
    air.refractive_index: {
        "temperature": ("20 degC", "temperature"),
        "pressure": ("1013 hPa", "pressure"),
        "humidity": ("50 %", "number"),
        "wavelength": ("633 nm", "length"),
        "co2": ("450 umol/mol", "number"),
    },
}
# plain numbers in and out, for code that has checked its values at the door
PLAIN = {
    strain.differential_m,
    fringe_law.slope_phase_rad,
    air.index_measured,
}


def test_the_table_holds_every_public_function():
    public = set()
    for module in (strain, cavity, fringe, fringe_law, ports, beam, photodiode, noise, air):
        members = [getattr(module, name) for name in module.__all__]
        public |= {m for m in members if inspect.isfunction(m)}
    top = {getattr(metro, name) for name in metro.__all__}
    functions = {f for f in top if inspect.isfunction(f) and f.__module__ != "metro.bench"}
    assert functions <= public
    assert public == FUNCTIONS.keys() | PLAIN


@pytest.mark.parametrize("function", FUNCTIONS, ids=lambda f: f.__name__)
def test_right_dimensions_are_taken(function):
    table = FUNCTIONS[function]
    assert list(table) == [
        name
        for name in inspect.signature(function).parameters
        if name not in {"exact", "slope", "equation", "signed"}
    ]
    as_text = function(**{name: value for name, (value, _) in table.items()})
    as_quantity = function(
        **{name: metro.units.parse_quantity(value) for name, (value, _) in table.items()}
    )
    assert str(as_text) == str(as_quantity)


CASES = [
    (function, name, dimension)
    for (function, table), dimension in itertools.product(FUNCTIONS.items(), SAMPLES)
    for name in table
    if dimension != table[name][1]
]


@pytest.mark.parametrize(
    ("function", "name", "dimension"), CASES, ids=lambda v: getattr(v, "__name__", v)
)
def test_wrong_dimensions_are_refused(function, name, dimension):
    arguments = {key: value for key, (value, _) in FUNCTIONS[function].items()}
    given = SAMPLES[dimension]
    for wrong in (given, metro.units.parse_quantity(given)):
        with pytest.raises(metro.MetroError) as caught:
            function(**(arguments | {name: wrong}))
        message = str(caught.value)
        assert message.startswith(f"{name} must ")
        assert given.partition(" ")[0] in message
        assert "\n" not in message


@pytest.mark.parametrize(
    "wrong",
    ["", "nan m", "inf", "1,5 m", "3 m + 1 m", "m", "0.5 mm mm mm x", None, True, object(), "1 dB"],
)
@pytest.mark.parametrize("function", FUNCTIONS, ids=lambda f: f.__name__)
def test_no_value_at_all_is_refused(function, wrong):
    for name in FUNCTIONS[function]:
        arguments = {key: value for key, (value, _) in FUNCTIONS[function].items()}
        with pytest.raises(metro.MetroError) as caught:
            function(**(arguments | {name: wrong}))
        assert str(caught.value).startswith(f"{name} ")
        assert "\n" not in str(caught.value)
