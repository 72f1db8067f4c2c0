"""Fringe with units at the door; arrays element by element against the kernel."""

import math

import numpy as np
import pytest
import strategies as values
from hypothesis import given
from hypothesis import strategies as st
from published import close, records

import metro
from metro import fringe_arrays as fringe
from metro import fringe_law as law
from metro.kernel import fringe as kernel
from metro.kernel import phase as phase_kernel


def test_phase_and_fringes_of_a_nanometre():
    # published: 0.0198583606422 rad, 0.0031605562579 fringes
    assert metro.phase("1 nm", "632.8 nm").to("rad").magnitude == pytest.approx(
        0.0198583606422, rel=1e-11
    )
    assert metro.fringes("1 nm", "632.8 nm").magnitude == pytest.approx(0.0031605562579, rel=1e-11)
    assert metro.displacement("0.0198583606422 rad", "632.8 nm").to(
        "nm"
    ).magnitude == pytest.approx(1.0, rel=1e-11)


def test_round_trips_and_index_multiply_the_phase():
    once = metro.phase("1 nm", "1 um")
    assert metro.phase("1 nm", "1 um", round_trips=3) == pytest.approx(3 * once)
    assert metro.phase("1 nm", "1 um", index=1.5) == pytest.approx(1.5 * once)


@given(values.wavelength_m, values.index, values.round_trips)
def test_half_a_wavelength_is_one_fringe(wavelength, n, trips):
    x = metro.Quantity(wavelength / (2 * n * trips), "m")
    assert metro.fringes(x, metro.Quantity(wavelength, "m"), n, trips).magnitude == pytest.approx(
        1.0
    )


def test_arrays():
    x = np.array([-3e-9, 0.0, 1e-21, 2e-6])
    phases = metro.phase(metro.Quantity(x, "m"), "633 nm", 1.00027)
    assert phases.magnitude.tolist() == [
        phase_kernel.phase_rad(v, 633e-9, 1.00027) for v in x.tolist()
    ]
    back = metro.displacement(phases, "633 nm", 1.00027)
    assert back.magnitude == pytest.approx(x, rel=1e-15)


@given(st.lists(st.floats(-30.0, 30.0), min_size=1, max_size=8), values.extremes_v)
def test_array_twins_follow_the_kernel(phases, extremes):
    array = np.array(phases)
    # numpy's cosine and sine may differ from math's in the last digit
    digit = 4e-16 * max(1.0, *map(abs, extremes))
    assert fringe.voltages(array, *extremes) == pytest.approx(
        [kernel.voltage(p, *extremes) for p in phases], abs=4 * digit
    )
    assert fringe.voltage_slopes(array, *extremes) == pytest.approx(
        [kernel.voltage_slope(p, *extremes) for p in phases], abs=4 * digit
    )


@pytest.mark.parametrize("rising", [True, False])
def test_array_twin_of_the_inverse(rising):
    volts = np.array([0.5, 0.500001, 1.7, 5.0, 9.999, 10.0])
    found = fringe.phases_on_slope_rad(volts, 0.5, 10.0, rising=rising)
    expected = [kernel.phase_of_voltage(v, 0.5, 10.0, rising) for v in volts.tolist()]
    assert found.tolist() == pytest.approx(expected, rel=1e-15)
    assert np.isnan(
        fringe.phases_on_slope_rad(np.array([0.4, 10.1]), 0.5, 10.0, rising=rising)
    ).all()


@pytest.mark.parametrize("working_phase", [-math.pi / 2, math.pi / 2, -0.4, 2.5, -7.0])
def test_array_twins_of_changes(working_phase):
    changes = np.array([-0.3, -1e-12, 0.0, 1e-9, 1e-3, 0.3])
    seen = fringe.signal_changes(changes, working_phase)
    one = [kernel.signal_change(c, working_phase) for c in changes.tolist()]
    assert seen.tolist() == pytest.approx(one, rel=1e-14)
    back = fringe.phase_changes(seen, working_phase)
    assert back.tolist() == pytest.approx(
        [kernel.phase_change(s, working_phase) for s in seen.tolist()], rel=1e-14
    )
    assert back == pytest.approx(changes, rel=1e-13)
    assert math.isnan(fringe.phase_changes(np.array([2.5]), working_phase)[0])


def test_voltage_and_slope_on_the_fringe():
    assert law.fringe_voltage("0 rad", "0.5 V", "10 V").magnitude == 10.0
    assert law.fringe_voltage("0.5 fringe", "0.5 V", "10 V").magnitude == pytest.approx(0.5)
    assert law.fringe_slope("-90 deg", "0.5 V", "10 V").magnitude == pytest.approx(4.75)
    assert law.phase_on_slope("5.25 V", "0.5 V", "10 V").magnitude == pytest.approx(-math.pi / 2)
    assert law.phase_on_slope("5.25 V", "0.5 V", "10 V", "falling").magnitude == pytest.approx(
        math.pi / 2
    )
    assert law.contrast("1 V", "3 V", "0.5 V").magnitude == pytest.approx(2 / 3)
    assert law.slope_phase_rad("rising") == -math.pi / 2


@pytest.mark.parametrize(
    ("call", "message"),
    [
        (
            lambda: metro.phase("1 kg", "633 nm"),
            "displacement must have a unit of length (such as '0.5 m'), got '1 kg'",
        ),
        (lambda: metro.phase("1 nm", "0 nm"), "wavelength must be > 0.0 m, got '0 nm'"),
        (lambda: metro.phase("1 nm", "633 nm", 2.7e-4), "index must be ≥ 1.0, got 0.00027"),
        (lambda: metro.phase("1 nm", "633 nm", 1.0, 0), "round_trips must be > 0.0, got 0"),
        (
            lambda: metro.displacement("1 m", "633 nm"),
            "phase must have a unit of angle (such as '0.02 rad'), got '1 m'",
        ),
        (
            lambda: law.phase_on_slope("11 V", "0 V", "10 V"),
            "voltage must be ≤ 10.0 V, got '11 V'",
        ),
        (
            lambda: law.phase_on_slope("1 V", "0 V", "10 V", "up"),
            "slope must be 'rising' or 'falling', got 'up'",
        ),
        (lambda: law.fringe_voltage("1 rad", "3 V", "3 V"), "high must be > 3.0 V, got '3 V'"),
        (
            lambda: law.fringe_voltage("1 rad", metro.Quantity([1.0, 2.0], "V"), "3 V"),
            "low must be one value, got 2",
        ),
        (lambda: law.contrast("1 V", "3 V", "2 V"), "dark must be < 2.0 V, got '2 V'"),
    ],
)
def test_wrong_arguments(call, message):
    with pytest.raises(metro.MetroError) as caught:
        call()
    assert str(caught.value) == message


LINES = [r for r in records("wavelengths").values() if "inputs" in r]


@pytest.mark.parametrize("record", LINES, ids=lambda r: r["id"])
def test_recommended_wavelengths(record):
    """BIPM recommended values: c over the frequency is the printed wavelength."""
    found = metro.vacuum_wavelength(metro.Quantity(record["inputs"]["f_Hz"], "Hz"))
    assert found.to("nm").magnitude == close(record)


def test_helium_neon_line_in_laboratory_air():
    record = records("wavelengths")["lam.hene.air633"]
    n = metro.refractive_index("20 degC", "101325 Pa", 0.5, "632.9908 nm").magnitude
    assert 632.9908 / n == close(record)


def test_fringe_counting_of_iso_16063():
    """Method 1: an amplitude s passes R_f = 4s/(λ/2) fringes a period."""
    table = records("bessel")
    once = metro.Quantity(table["iso.m1"]["value"], "m")
    assert 4 * metro.fringes(once, "632.81 nm").magnitude == pytest.approx(1.0, rel=1e-12)
    nanometres, count = table["iso.m1.ex"]["value"]
    amplitude = 10 / (2 * math.pi * 160) ** 2
    assert amplitude * 1e9 == close(table["iso.m1.ex"])[0]
    assert (
        4 * metro.fringes(metro.Quantity(nanometres, "nm"), "632.81 nm").magnitude
        == close(table["iso.m1.ex"])[1]
    )
    assert count > 0
