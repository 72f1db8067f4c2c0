"""Photodiode, noise and converter against published and derived figures."""

import cmath
import math

import pytest
import strategies as values
from hypothesis import given
from hypothesis import strategies as st
from published import close, published, records

from metro.kernel import constants, noise, photodiode

HERTZ = st.floats(0.1, 1e6)


def test_defining_constants():
    table = records("constants")
    assert table["const.c"]["value"] == constants.SPEED_OF_LIGHT_M_S
    assert table["const.h"]["value"] == constants.PLANCK_J_S
    assert table["const.e"]["value"] == constants.ELEMENTARY_CHARGE_C
    assert table["const.kB"]["value"] == constants.BOLTZMANN_J_K
    photon = constants.PLANCK_J_S * constants.SPEED_OF_LIGHT_M_S
    assert photon == close(table["const.hc"])
    assert 1e9 * photon / constants.ELEMENTARY_CHARGE_C == pytest.approx(
        table["const.hc_over_e"]["value"], rel=1e-15
    )


@published("photodiode", "pd.R.")
def test_responsivity(record):
    wavelength = record["inputs"]["wavelength_nm"] * 1e-9
    found = photodiode.responsivity_a_w(1.0, wavelength)
    assert found == close(record)
    assert photodiode.quantum_efficiency(found, wavelength) == pytest.approx(1.0, rel=1e-15)


@pytest.mark.parametrize(("key", "current_a"), [("shot.1mA", 1e-3), ("shot.1uA", 1e-6)])
def test_shot_noise(key, current_a):
    record = records("photodiode")[key]
    # printed to ten digits
    assert noise.shot_current(current_a) == pytest.approx(record["value"], rel=1e-9)


@pytest.mark.parametrize(
    ("key", "temperature_k"),
    [("johnson.1k.300", 300.0), ("johnson.1k.290", 290.0), ("johnson.1k.293", 293.15)],
)
def test_johnson_voltage(key, temperature_k):
    assert noise.johnson_voltage(1e3, temperature_k) == close(records("photodiode")[key])


def test_johnson_current():
    record = records("photodiode")["johnson.10k.I"]
    assert noise.johnson_current(1e4, 300.0) == close(record)


def test_voltage_at_which_shot_and_johnson_noise_are_equal():
    record = records("photodiode")["shot.eq"]
    for voltage, temperature_k in zip(record["value"], (300.0, 293.15), strict=True):
        shot = noise.shot_current(voltage / 1e3)
        assert shot == pytest.approx(noise.johnson_current(1e3, temperature_k), rel=1e-9)


def test_converter():
    table = records("photodiode")
    bits = (8, 10, 12, 14, 16)
    assert [photodiode.full_scale_snr_db(n) for n in bits] == close(table["adc.snr"])
    assert noise.quantisation_v(photodiode.step_v(5.0, 12)) == close(table["adc.q12"])
    assert noise.effective_noise_v(5.0, 12) == close(table["adc.q12"])
    # the same ratio from its definition: a full-scale sine over the quantisation noise
    ratio = 2.5 / math.sqrt(2) / noise.quantisation_v(photodiode.step_v(5.0, 12))
    assert 20 * math.log10(ratio) == pytest.approx(photodiode.full_scale_snr_db(12), abs=1e-9)


@given(st.floats(-5, 5), st.integers(4, 24), st.floats(0.1, 20), st.floats(-2, 2))
def test_counts(voltage, bits, full, offset):
    counts = photodiode.counts(voltage, full, bits, offset)
    assert counts * photodiode.step_v(full, bits) + offset == pytest.approx(voltage, abs=1e-12)


@given(HERTZ, HERTZ)
def test_one_pole(frequency, corner):
    expected = 1 / (1 + 1j * frequency / corner)
    assert photodiode.one_pole_response(frequency, corner) == pytest.approx(expected, rel=1e-13)


def test_one_pole_at_its_corner():
    response = photodiode.one_pole_response(5e3, 5e3)
    assert abs(response) == pytest.approx(math.sqrt(0.5))
    assert cmath.phase(response) == pytest.approx(-math.pi / 4)


def test_aperture_and_delay():
    assert abs(photodiode.aperture_response(1e3, 1e-3)) < 1e-15  # a whole period averages out
    assert photodiode.aperture_response(1e3, 0.0) == 1.0
    response = photodiode.aperture_response(250.0, 1e-3)
    assert abs(response) == pytest.approx(math.sin(math.pi / 4) / (math.pi / 4))
    assert cmath.phase(response) == pytest.approx(-math.pi / 4)
    assert photodiode.delay_response(250.0, 1e-3) == pytest.approx(-1j)


def test_densities_add_in_power_at_any_size():
    assert noise.root_sum([3.0, 4.0]) == 5.0
    assert noise.root_sum([3e-200, 4e-200]) == pytest.approx(5e-200)
    assert noise.root_sum([]) == noise.root_sum([0.0, 0.0]) == 0.0


@given(values.displacement_m, st.floats(1e-18, 1e-9), st.floats(1e-3, 1e5))
def test_averaging_time_reaches_its_ratio(amplitude, density, duration):
    ratio = noise.signal_to_noise(amplitude, density, duration)
    assert noise.averaging_time_s(amplitude, density, ratio) == pytest.approx(duration, rel=1e-12)
