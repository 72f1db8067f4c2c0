"""Strain with units at the door; arrays element by element against the kernel."""

import numpy as np
import pytest
from published import close, records

import metro
from metro.kernel import antenna, arms
from metro.kernel import strain as kernel


def test_displacement_of_a_strain():
    found = metro.arm_displacement(1e-21, "4 km")
    assert (found.magnitude, f"{found.units:~}") == (pytest.approx(4e-18, rel=1e-15), "m")
    assert metro.arm_displacement("1e-21", "400000 cm") == pytest.approx(found)


def test_exact_displacement():
    found = metro.arm_displacement(0.1, "1 m", exact=True)
    assert found.magnitude == kernel.exact_differential_m(0.1, 1.0)
    # h²/8 and its next term; the published figure is 1.2555012e-3
    assert found.magnitude / 0.1 - 1 == pytest.approx(1.2555012e-3, abs=1e-10)


@pytest.mark.parametrize("exact", [False, True])
def test_arrays_of_strain(exact):
    h = np.array([[-0.5, -1e-3, 0.0], [1e-21, 1e-3, 1.0]])
    found = metro.arm_displacement(metro.Quantity(h, "1"), "3 m", exact=exact)
    one = kernel.exact_differential_m if exact else kernel.differential_m
    # numpy and math round their square roots alike
    assert found.magnitude.tolist() == [[one(x, 3.0) for x in row] for row in h.tolist()]
    back = metro.arm_strain(found, "3 m", exact=exact)
    assert back.magnitude == pytest.approx(h, rel=1e-12)


def test_length_strain_of_one_arm_is_named():
    assert metro.one_arm_displacement("10 ppm", "0.5 m").magnitude == pytest.approx(5e-6)


def test_arm_response():
    found = metro.arm_response("100 MHz", "0.5 m")
    # the published figure of tests/published_values/strain.toml
    assert abs(found).magnitude == pytest.approx(0.8267669097579335, abs=1e-14)
    assert complex(found) == arms.arm_response(1e8, 0.5)
    many = metro.arm_response(metro.Quantity([0.0, 1e8], "Hz"), "0.5 m", 0.3)
    assert many.magnitude.tolist() == [1.0, arms.arm_response(1e8, 0.5, 0.3)]


def test_antenna_response():
    plus, cross = metro.antenna_response("60 deg", "30 deg", "0 deg")
    # published: 0.3125, 0.43301270189222
    assert (plus.magnitude, cross.magnitude) == pytest.approx((0.3125, 0.43301270189222), abs=1e-13)
    angles = np.array([0.0, 1.0, 2.0])
    plus, cross = metro.antenna_response(
        metro.Quantity(angles, "rad"), "1 rad", "0.2 rad", "60 deg"
    )
    for i, theta in enumerate(angles):
        both = antenna.antenna_response(theta, 1.0, 0.2, np.pi / 3)
        assert (plus.magnitude[i], cross.magnitude[i]) == pytest.approx(both, rel=1e-14)


@pytest.mark.parametrize(
    ("call", "message"),
    [
        (
            lambda: metro.arm_displacement(1e-21, 0.5),
            "arm_length must have a unit of length (such as '0.5 m'), got 0.5",
        ),
        (
            lambda: metro.arm_displacement(1e-21, "-1 m"),
            "arm_length must be > 0.0 m, got '-1 m'",
        ),
        (
            lambda: metro.arm_displacement(1.5, "1 m", exact=True),
            "strain must be ≤ 1.0, got 1.5",
        ),
        (
            lambda: metro.arm_response("1 m", "1 m"),
            "frequency must have a unit of frequency (such as '87.1 Hz'), got '1 m'",
        ),
        (
            lambda: metro.arm_response("1 Hz", "1 m", 2.0),
            "direction_cosine must be ≤ 1.0, got 2.0",
        ),
        (
            lambda: metro.antenna_response("1 m", "0 deg", "0 deg"),
            "theta must have a unit of angle (such as '0.02 rad'), got '1 m'",
        ),
        (
            lambda: metro.antenna_response("0 deg", "0 deg", "0 deg", "270 deg"),
            "opening_angle must be ≤ 3.141592653589793 rad, got '270 deg'",
        ),
    ],
)
def test_wrong_arguments(call, message):
    with pytest.raises(metro.MetroError) as caught:
        call()
    assert str(caught.value) == message


def test_published_strains():
    table = records("strain")
    kilometres = metro.arm_displacement(1e-21, "4 km")
    assert [kilometres.magnitude, kernel.arm_change_m(1e-21, 4000.0)] == close(table["gw.4km"])
    assert metro.phase(kilometres, "1064 nm").magnitude == close(table["gw.phase.4km"])
    half = metro.arm_displacement(1e-21, "0.5 m")
    assert [half.magnitude, metro.phase(half, "632.8 nm").magnitude] == close(table["gw.table"])
