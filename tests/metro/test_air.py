"""Refractive index of air with units and uncertainty."""

import math

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st
from published import close, records

import metro
from metro.air import index_measured
from metro.air_index import solve_air
from metro.air_state import AirState

M = metro.Measured.of
POINT = {
    "temperature": M(293.15, "K", 0.1),
    "pressure": M(101325.0, "Pa", 20.0),
    "humidity": M(0.5, "1", 0.02),
    "wavelength": M(632.9908e-9, "m", 0.95e-12),
    "co2": M(450e-6, "1", 30e-6),
}


def test_published_point():
    record = records("air")["air.point.ciddor.50"]
    result = solve_air(POINT, "ciddor")
    found = [result.index.magnitude, 1e9 * result.wavelength_in_air.magnitude]
    assert found == close(record)
    assert (
        metro.refractive_index("20 degC", "101325 Pa", "50%", "632.9908 nm").magnitude == found[0]
    )


def test_published_sensitivities():
    table = records("air")
    slopes = solve_air(POINT, "ciddor").sensitivities
    assert slopes["temperature"].magnitude == close(table["air.sens.dndt"])
    assert slopes["pressure"].magnitude == close(table["air.sens.dndp"])
    assert slopes["humidity"].magnitude / 100 == close(table["air.sens.dndrh"])
    assert slopes["co2"].magnitude * 1e-6 == close(table["air.sens.dndxc"])
    vapour = POINT | {"humidity": M(1169.607, "Pa", 10.0)}
    slopes = solve_air(vapour, "ciddor", "vapour pressure").sensitivities
    assert slopes["temperature"].magnitude == close(table["air.sens.dndt.pv"])
    assert slopes["humidity"].magnitude == close(table["air.sens.dndpv"])
    assert slopes["humidity"].unit == "1/Pa"


def test_rules_of_thumb():
    """Two per cent of the trade's round figures, which hold at constant vapour pressure."""
    vapour = POINT | {"humidity": M(1169.607, "Pa", 10.0)}
    slopes = solve_air(vapour, "ciddor", "vapour pressure").sensitivities
    humidity = solve_air(POINT, "ciddor").sensitivities["humidity"].magnitude / 100
    found = [slopes["temperature"].magnitude, slopes["pressure"].magnitude, humidity]
    assert found == pytest.approx(records("air")["air.rule"]["value"], rel=0.02)
    assert solve_air(POINT, "ciddor").index.magnitude - 1 == close(records("air")["air.vac"])


def test_uncertainty_is_the_root_sum_of_its_contributions():
    result = solve_air(POINT, "ciddor")
    slopes = result.sensitivities
    for name, value in POINT.items():
        expected = abs(slopes[name].magnitude) * value.u_magnitude
        assert result.contributions[name] == pytest.approx(expected)
    assert result.contributions["equation"] == pytest.approx(2.301e-8 / 2, abs=1e-11)
    total = math.sqrt(sum(u * u for u in result.contributions.values()))
    assert result.index.u_magnitude == pytest.approx(total)
    assert index_measured(
        POINT["temperature"], POINT["pressure"], POINT["humidity"], POINT["wavelength"]
    ).u_magnitude == pytest.approx(math.sqrt(total**2 - result.contributions["co2"] ** 2))


def test_uncertainty_agrees_with_a_draw_of_the_inputs():
    """The linear sum against the scatter of 4000 draws, to the 5 % such a number of draws allows."""
    rng = np.random.default_rng(7)
    draws = []
    for _ in range(4000):
        t, p, h, w, c = (
            v.magnitude + v.u_magnitude * rng.standard_normal() for v in POINT.values()
        )
        draws.append(AirState(t, p, h, w, c).refractivity("ciddor"))
    result = solve_air(POINT, "ciddor")
    linear = math.sqrt(result.index.u_magnitude**2 - result.equation_u**2)
    assert np.std(draws) == pytest.approx(linear, rel=0.05)


def test_wavelength_in_air_carries_both_uncertainties():
    result = solve_air(POINT, "ciddor")
    relative = result.wavelength_in_air.u_magnitude / result.wavelength_in_air.magnitude
    assert relative == pytest.approx(
        math.hypot(0.95e-12 / 632.9908e-9, result.index.u_magnitude), rel=1e-4
    )


@given(st.floats(243.15, 333.15), st.floats(60e3, 120e3), st.floats(0.0, 0.95))
def test_ways_to_state_humidity_agree(temperature, pressure, humidity):
    state = AirState(temperature, pressure, humidity, 633e-9)
    vapour = state.vapour_pa
    by_pressure = AirState(temperature, pressure, vapour, 633e-9, kind="vapour pressure")
    from metro.kernel.humidity import mole_fraction

    x = mole_fraction(temperature, pressure, vapour)
    by_fraction = AirState(temperature, pressure, x, 633e-9, kind="mole fraction")
    for other in (by_pressure, by_fraction):
        assert other.refractivity("ciddor") == pytest.approx(
            state.refractivity("ciddor"), rel=1e-14
        )


def test_saturated_air_has_its_dew_point_at_its_temperature():
    saturated = AirState(293.15, 101325.0, 1.0, 633e-9)
    dew = AirState(293.15, 101325.0, 293.15, 633e-9, kind="dew point")
    assert dew.vapour_pa == saturated.vapour_pa
    # 9.27 °C is the dew point of 50 % at 20 °C (psychrometric tables, from memory)
    half = AirState(293.15, 101325.0, 282.42, 633e-9, kind="dew point")
    assert half.vapour_pa / saturated.vapour_pa == pytest.approx(0.5, abs=0.001)


def test_stated_uncertainty_grows_outside_an_equations_range():
    room = AirState(293.15, 101325.0, 0.5, 633e-9)
    hot = AirState(323.15, 101325.0, 0.5, 633e-9)
    for equation in ("ciddor", "edlen", "edlen1994"):
        assert hot.equation_u(equation) > 1.5 * room.equation_u(equation)
    far = solve_air(POINT | {"temperature": M(323.15, "K")}, "edlen")
    assert far.remarks[0] == (
        "temperature 323.15 K is outside the range 283.15 … 303.15 K of this equation;"
        " its uncertainty is stated larger"
    )
    # the distance from Ciddor is covered by the stated u of the Edlén variants
    for state in (hot, AirState(233.15, 1e5, 0.0, 633e-9), AirState(323.15, 1.2e5, 1.0, 633e-9)):
        for equation in ("edlen", "edlen1994"):
            apart = state.refractivity(equation) - state.refractivity("ciddor")
            assert abs(apart) < 2 * state.equation_u(equation)


@pytest.mark.parametrize("temperature", ["-40 degC", "100 degC"])
@pytest.mark.parametrize("pressure", ["10 kPa", "140 kPa"])
@pytest.mark.parametrize("wavelength", ["300 nm", "1700 nm"])
@pytest.mark.parametrize("equation", ["ciddor", "edlen", "edlen1994"])
def test_corners_are_inside(temperature, pressure, wavelength, equation):
    n = metro.refractive_index(temperature, pressure, 0.0, wavelength, equation=equation)
    assert 1.00002 < n.magnitude < 1.0006


def test_arrays():
    temperatures = metro.Quantity([15.0, 20.0, 25.0], "degC")
    many = metro.refractive_index(temperatures, "1000 hPa", 0.4, "633 nm").magnitude
    one = [
        metro.refractive_index(f"{t} degC", "1000 hPa", 0.4, "633 nm").magnitude
        for t in (15, 20, 25)
    ]
    assert many.tolist() == one


@pytest.mark.parametrize(
    ("changes", "message"),
    [
        ({"temperature": "101 degC"}, "temperature must be 233.15 … 373.15 K, got 374.15 K"),
        ({"pressure": "9 kPa"}, "pressure must be 10000 … 140000 Pa, got 9000 Pa"),
        ({"wavelength": "2 um"}, "wavelength must be 3e-07 … 1.7e-06 m, got 2e-06 m"),
        ({"humidity": 50.0}, "humidity must be ≤ 1.0, got 50.0"),
        ({"humidity": "-1%"}, "humidity must be ≥ 0.0, got '-1%'"),
        ({"co2": 450.0}, "co2 must be 0 … 0.002 mol/mol, got 450 mol/mol"),
        ({"equation": "owens"}, "equation must be 'ciddor' or 'edlen' or 'edlen1994', got 'owens'"),
        (
            {"temperature": "293.15"},
            "temperature must have a unit of temperature (such as '20 degC'), got '293.15'",
        ),
    ],
)
def test_wrong_arguments(changes, message):
    arguments = {
        "temperature": "20 degC",
        "pressure": "1 atm",
        "humidity": 0.5,
        "wavelength": "633 nm",
    }
    with pytest.raises(metro.MetroError) as caught:
        metro.refractive_index(**(arguments | changes))
    assert str(caught.value) == message


@pytest.mark.parametrize(
    ("value", "kind", "message"),
    [
        (M(300.0, "K"), "dew point", "dew point must be 200 … 293.15 K, got 300 K"),
        (
            M(3000.0, "Pa"),
            "vapour pressure",
            "vapour pressure must leave the air below saturation, 2341.55 Pa of vapour at 293.15 K, got 3000 Pa",
        ),
        (
            M(0.5, "1"),
            "mole fraction",
            "mole fraction must leave the air below saturation, 2341.55 Pa of vapour at 293.15 K, got 50459.4 Pa",
        ),
        (M(-1.0, "Pa"), "vapour pressure", "vapour pressure must be 0 … 101325 Pa, got -1 Pa"),
        (
            M(0.5, "1"),
            "absolute",
            "humidity must be one of relative, dew point, vapour pressure, mole fraction, got 'absolute'",
        ),
    ],
)
def test_impossible_humidity(value, kind, message):
    with pytest.raises(metro.MetroError) as caught:
        solve_air(POINT | {"humidity": value}, "ciddor", kind)
    assert str(caught.value) == message


def test_boiling_air_is_refused():
    with pytest.raises(metro.MetroError, match="below the total pressure, 20000 Pa"):
        metro.refractive_index("90 degC", "20 kPa", 1.0, "633 nm")
