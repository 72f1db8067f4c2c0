"""Noise as displacement, each source against its formula by hand."""

import math

import pytest
from published import records

import metro
from metro.kernel.cavity import cavity_pole_hz
from metro.kernel.constants import BOLTZMANN_J_K, ELEMENTARY_CHARGE_C, SPEED_OF_LIGHT_M_S
from metro.sensitivity import displacement_noise, strain_scale

PER_METRE = 4 * math.pi / 632.8e-9
BENCH = {
    "wavelength": "632.8 nm",
    "power": "80 uW",
    "contrast": 0.9,
    "responsivity": "0.4 A/W",
    "transimpedance": "62 kohm",
    "adc_bits": 16,
    "adc_range": "10 V",
    "adc__rate": "4 kHz",
}
CURRENT_PER_METRE = 80e-6 * 0.9 * 0.4 * PER_METRE


def densities(frequency_hz=0.0, **changes):
    return displacement_noise(metro.Bench.of(**(BENCH | changes)).chain(), frequency_hz).densities


def test_published_shot_noise_of_a_michelson():
    record = records("photodiode")["shot.mich.mean"]
    bench = metro.Bench.of(wavelength="632.8 nm", power="80 uW", quantum_efficiency=1, contrast=1)
    noise = displacement_noise(bench.chain())
    # printed to ten digits
    assert noise.densities["shot"] == pytest.approx(record["value"], rel=1e-9)
    assert noise.total == noise.densities["shot"]
    # Moss, Miller & Forward 1971 calculated 1.06e-14 for their diode and measured 1.3e-14: above it
    measured = records("photodiode")["moss.meas"]["value"]
    assert noise.total < records("photodiode")["moss.calc"]["value"] < measured


@pytest.mark.parametrize(
    ("i", "changes"), [(0, {"quantum_efficiency": 1}), (1, {"responsivity": "0.4 A/W"})]
)
def test_published_shot_noise_of_a_milliwatt_at_the_maximum(i, changes):
    record = records("photodiode")["shot.mich.1mW"]
    bench = metro.Bench.of(wavelength="632.8 nm", power="0.5 mW", **changes)
    assert displacement_noise(bench.chain()).densities["shot"] == pytest.approx(
        record["value"][i], rel=1e-6
    )


def test_sources_by_hand():
    found = densities(
        laser__relative_intensity_noise="1e-7 /√Hz",
        laser__frequency_noise="1 kHz/√Hz",
        arms__mismatch="2 mm",
        arms__length="0.5 m",
        photodiode__amplifier_voltage_noise="5 nV/√Hz",
        photodiode__amplifier_current_noise="10 fA/√Hz",
        air__index={"value": 1.0, "u": 0},
        air__common_noise="1e-9 /√Hz",
        air__differential_noise="1e-11 /√Hz",
    )
    current = 80e-6 * 0.4
    expected = {
        "shot": math.sqrt(2 * ELEMENTARY_CHARGE_C * current) / CURRENT_PER_METRE,
        "johnson": math.sqrt(4 * BOLTZMANN_J_K * 293.15 / 62e3) / CURRENT_PER_METRE,
        "amplifier_voltage": 5e-9 / 62e3 / CURRENT_PER_METRE,
        "amplifier_current": 10e-15 / CURRENT_PER_METRE,
        "adc": 10 / 65536 / math.sqrt(12) / math.sqrt(2000) / (CURRENT_PER_METRE * 62e3),
        "relative_intensity": 1e-7 / (0.9 * PER_METRE),
        "laser_frequency": 2e-3 * 1e3 * 632.8e-9 / SPEED_OF_LIGHT_M_S,
        "air": math.hypot(1e-9 * 2e-3, 1e-11 * 0.5),
    }
    assert found.pop("tilt") is None
    assert found == pytest.approx(expected, rel=1e-9)
    noise = displacement_noise(metro.Bench.of(**BENCH).chain())
    assert noise.densities["tilt"] is None
    assert noise.total == pytest.approx(
        math.sqrt(expected["shot"] ** 2 + expected["johnson"] ** 2 + expected["adc"] ** 2)
    )


def test_dark_noise_and_effective_bits_replace_the_ideal_converter():
    scale = CURRENT_PER_METRE * 62e3 * math.sqrt(2000)
    assert densities(adc__noise="0.2 mV")["adc"] == pytest.approx(0.2e-3 / scale)
    expected = 10 / 2**13.5 / math.sqrt(12) / scale
    assert densities(adc__effective_bits=13.5)["adc"] == pytest.approx(expected)


def test_poles_raise_what_enters_behind_them_and_nothing_else():
    flat = densities(1000.0)
    poled = densities(1000.0, photodiode__bandwidth="1 kHz", adc__antialias="1 kHz")
    assert poled["adc"] == pytest.approx(2 * flat["adc"])
    assert poled["shot"] == flat["shot"]
    # the diode's capacitance lets the amplifier's voltage noise drive a current that grows with f
    with_c = densities(
        1000.0, photodiode__amplifier_voltage_noise="5 nV/√Hz", photodiode__capacitance="1 nF"
    )
    expected = 5e-9 * math.hypot(1 / 62e3, 2 * math.pi * 1e3 * 1e-9) / CURRENT_PER_METRE
    assert with_c["amplifier_voltage"] == pytest.approx(expected)


def test_quantisation_alone_is_called_doubtful():
    noise = displacement_noise(metro.Bench.of(**(BENCH | {"adc_bits": 8})).chain())
    assert noise.remarks[0].startswith(
        "adc noise is q/√12, which holds only where the signal moves by about a count: the known noise is"
    )
    measured = displacement_noise(metro.Bench.of(**BENCH, adc__noise="0.2 mV").chain())
    assert measured.remarks == ()


def test_what_is_not_known_is_named():
    noise = displacement_noise(metro.Bench.of(wavelength="633 nm").chain())
    assert noise.total is None
    assert noise.missing["shot"] == "--power, --responsivity or --quantum-efficiency"
    assert noise.missing["johnson"] == "--transimpedance"
    assert noise.missing["laser_frequency"] == (
        "[laser] frequency_noise in the bench file and [arms] mismatch in the bench file"
    )


def test_strain_scale():
    chain = metro.Bench.of(arm="4 km").chain()
    assert strain_scale(chain, 0.0) == 1 / 4000
    # at half the null frequency the arms see 2/π
    assert strain_scale(chain, 37474.05725 / 2) == pytest.approx(math.pi / 2 / 4000)
    assert strain_scale(metro.Bench().chain(), 0.0) is None


def test_tilt_is_seen_through_the_beam_offset():
    assert densities(arms__tilt_noise="1 nrad/√Hz", arms__beam_offset="-0.3 mm")[
        "tilt"
    ] == pytest.approx(3e-13)


def test_light_stored_in_the_arms_takes_noise_and_signal_apart():
    """Shot noise does not know of the cavity; the signal has lost 3 dB at its pole."""
    bench = BENCH | {"arms__length": "4 km", "arms__input_reflectance": 0.97}
    pole = cavity_pole_hz(4000.0, 0.97)
    low, high = (displacement_noise(metro.Bench.of(**bench).chain(), f) for f in (0.0, pole))
    # a pole and the sum over trips part by (1−ρ)²/24 at this frequency
    assert high.densities["shot"] / low.densities["shot"] == pytest.approx(math.sqrt(2), rel=1e-4)
    gain = (1 + math.sqrt(0.97)) / (1 - math.sqrt(0.97))
    assert low.densities["shot"] == pytest.approx(densities()["shot"] / gain)
