"""Refractive index of air against the published check values."""

import math

import pytest
from published import close, published, records

from metro.kernel.air import ciddor, ciddor_u, edlen
from metro.kernel.humidity import (
    enhancement_factor,
    mole_fraction,
    saturation_pressure_pa,
    vapour_pressure_pa,
)


def davis_saturation_pa(temperature_k):
    """R. S. Davis, Metrologia 29 (1992) 67 (from memory), with which Ciddor's Table 3 was made."""
    t = temperature_k
    return math.exp(1.2378847e-5 * t * t - 1.9121316e-2 * t + 33.93711047 - 6343.1645 / t)


def inputs(record):
    given = record["inputs"]
    t, p = given["t_C"] + 273.15, float(given["p_Pa"])
    saturation = davis_saturation_pa if ".t3." in record["id"] else saturation_pressure_pa
    vapour = given.get("pw_Pa", given.get("RH_percent", 0) / 100 * saturation(t))
    wavelength = given["vacuum_wavelength_nm"] * 1e-9
    return t, p, vapour, wavelength, given["xCO2_umol_per_mol"] * 1e-6


@published("air", "air.nist.ciddor")
def test_ciddor_of_the_nist_toolbox(record):
    t, p, vapour, wavelength, co2 = inputs(record)
    assert 1 + ciddor(t, p, mole_fraction(t, p, vapour), wavelength, co2) == close(record)


@published("air", "air.nist.edlen")
def test_edlen_of_the_nist_toolbox(record):
    t, p, vapour, wavelength, co2 = inputs(record)
    assert 1 + edlen(t, p, vapour, wavelength, co2) == close(record)


@published("air", "air.ciddor.t")
def test_tables_of_ciddor(record):
    t, p, vapour, wavelength, co2 = inputs(record)
    assert 1e8 * ciddor(t, p, mole_fraction(t, p, vapour), wavelength, co2) == close(record)


def test_water_terms_of_the_edlen_variants_differ_when_warm_and_wet():
    """Up to 4e-7 at 50 °C, saturated: the reason why the variant must be named."""
    t, p = 323.15, 101325.0
    vapour = saturation_pressure_pa(t)
    apart = edlen(t, p, vapour, 633e-9) - edlen(t, p, vapour, 633e-9, warm_water=False)
    assert 3.5e-7 < apart < 4.5e-7
    cold = 292.75
    assert edlen(cold, p, 1000.0, 633e-9) == edlen(cold, p, 1000.0, 633e-9, warm_water=False)


def test_saturation_over_water():
    record = records("air")["air.psv.20"]
    assert saturation_pressure_pa(293.15) == close(record)


@pytest.mark.parametrize(
    ("temperature_k", "pressure_pa"),
    # IAPWS R7-97(2012), table 35: check values of the saturation-pressure equation, in MPa there
    [(300.0, 0.353658941e-2 * 1e6), (500.0, 0.263889776e1 * 1e6), (600.0, 0.123443146e2 * 1e6)],
)
def test_saturation_check_values_of_iapws(temperature_k, pressure_pa):
    assert saturation_pressure_pa(temperature_k) == pytest.approx(pressure_pa, rel=2e-9)


def test_saturation_over_ice():
    # IAPWS R14-08, check value 8.94735 Pa of the sublimation pressure at 230 K (from memory); that
    # is a later equation, which differs from the one used here by 1e-4
    assert saturation_pressure_pa(230.0) == pytest.approx(8.94735, rel=3e-4)
    above, below = saturation_pressure_pa(273.16), saturation_pressure_pa(273.16 - 1e-9)
    assert above == pytest.approx(below, rel=1e-7)


def test_mole_fraction_and_vapour_pressure_are_inverse():
    x = mole_fraction(295.0, 98000.0, 1300.0)
    assert vapour_pressure_pa(295.0, 98000.0, x) == pytest.approx(1300.0, rel=1e-15)
    assert enhancement_factor(293.15, 101325.0) == pytest.approx(1.00403, abs=1e-5)


def test_uncertainty_of_the_equation():
    record = records("air")["air.U95.ciddor"]
    assert 2 * ciddor_u(293.15, 101325.0, 0.0, 633e-9) == close(record)
    # 2.301e-8 at 50 % relative humidity, computed independently from the same formula
    half_wet = 0.5 * saturation_pressure_pa(293.15)
    assert 2 * ciddor_u(293.15, 101325.0, half_wet, 633e-9) == pytest.approx(2.301e-8, abs=2e-11)


def test_dispersion_and_group_index():
    """BIPM, Mise en pratique for the definition of the metre (2019), note on the speed of light."""
    blue, red = (ciddor(293.15, 101325.0, 0.0, w) for w in (380e-9, 780e-9))
    assert blue - red == close(records("air")["air.bipm.disp"])
    step = 1e-10
    green = 520e-9
    slope = (
        ciddor(293.15, 101325.0, 0.0, green + step) - ciddor(293.15, 101325.0, 0.0, green - step)
    ) / (2 * step)
    assert -green * slope == close(records("air")["air.bipm.ng"])


def test_shop_floor_formula_agrees():
    """The NIST shop-floor formula claims to agree with Ciddor within 5e-8 near 20 °C."""
    record = records("air")["air.shopfloor.point"]
    vapour = 0.5 * saturation_pressure_pa(293.15)
    n = 1 + ciddor(293.15, 101325.0, mole_fraction(293.15, 101325.0, vapour), 633e-9)
    assert n == pytest.approx(record["value"], abs=5e-8)
