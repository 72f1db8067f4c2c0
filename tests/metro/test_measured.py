"""Measured values: their JSON form, their expanded uncertainty and how people read them."""

import json
import math
import pickle

import numpy as np
import pytest

from metro.errors import MetroError
from metro.measured import Measured
from metro.output import to_json
from metro.units import quantity, registry


def test_json_form_is_si():
    measured = Measured(quantity(4.0, "am"), quantity(0.5, "am"))
    assert measured.to_dict() == {"value": 4e-18, "unit": "m", "u": 5e-19}
    assert Measured(quantity(4.0, "am")).to_dict() == {"value": 4e-18, "unit": "m", "u": None}


@pytest.mark.parametrize(
    ("unit", "text", "factor"),
    [
        ("nm", "m", 1e-9),
        ("mV", "V", 1e-3),
        ("nm/V", "m/V", 1e-9),
        ("V/um", "V/m", 1e6),
        ("pm/Hz**0.5", "m/Hz**0.5", 1e-12),
        ("mrad", "rad", 1e-3),
        ("deg", "rad", math.pi / 180),
        ("fringe", "rad", 2 * math.pi),
        ("percent", "1", 0.01),
        ("count", "1", 1.0),
        ("1", "1", 1.0),
        ("kohm", "ohm", 1e3),
        ("min", "s", 60.0),
        ("hPa", "Pa", 100.0),
        ("umol/mol", "1", 1e-6),
        ("V**2/Hz", "V**2/Hz", 1.0),
        ("1/s", "1/s", 1.0),
        ("A/W", "A/W", 1.0),
        ("kg", "kg", 1.0),
        ("g", "kg", 1e-3),
        ("m/degC", "m/K", 1.0),
        ("rad/V", "rad/V", 1.0),
    ],
)
def test_units_in_json(unit, text, factor):
    document = Measured(quantity(3.0, unit), quantity(0.5, unit)).to_dict()
    assert document["unit"] == text
    assert document["value"] == pytest.approx(3 * factor, rel=1e-14)
    assert document["u"] == pytest.approx(0.5 * factor, rel=1e-14)
    # What is written is read back as the same unit.
    assert registry().Quantity(1.0, text).is_compatible_with(quantity(1.0, unit))


def test_temperature_and_its_uncertainty():
    measured = Measured(quantity(20.0, "degC"), quantity(0.3, "degC"))
    assert measured.to_dict() == {"value": 293.15, "unit": "K", "u": 0.3}


def test_uncertainty_in_another_unit():
    assert Measured(quantity(1.0, "m"), quantity(1.0, "mm")).to_dict()["u"] == 1e-3
    with pytest.raises(MetroError, match="u must have a unit of length"):
        Measured(quantity(1.0, "m"), quantity(1.0, "s"))
    with pytest.raises(MetroError, match="u must be ≥ 0 m, got -1"):
        Measured.of(1.0, "m", -1.0)
    with pytest.raises(MetroError, match="dof must be > 0, got 0"):
        Measured.of(1.0, "m", 1.0, dof=0)


def test_arrays():
    measured = Measured.of(np.array([1.0, math.nan]), "m", np.array([0.1, math.inf]), dof=5)
    assert measured.to_dict() == {"value": [1.0, None], "unit": "m", "u": [0.1, None]}
    assert measured.value.magnitude.shape == (2,)
    assert str(measured) == "2 values in m, with uncertainties"
    back = Measured.from_dict(json.loads(to_json(Measured.of(np.arange(3.0), "V"))))
    np.testing.assert_array_equal(back.magnitude, np.arange(3.0))


def test_nothing_unfinite_in_json():
    assert Measured.of(math.nan, "m", math.inf).to_dict() == {"value": None, "unit": "m", "u": None}


def test_expanded_uncertainty_has_students_factor():
    """GUM table G.2: t95(4) = 2.78, t95(16) = 2.12; the normal factor is 1.96."""
    for dof, factor in ((4, 2.78), (16, 2.12), (math.inf, 1.96)):
        measured = Measured.of(1.0, "m", 0.1, dof)
        assert measured.coverage_factor(0.95) == pytest.approx(factor, abs=0.005)
        assert measured.expanded(0.95).to("m").magnitude == pytest.approx(0.1 * factor, abs=5e-4)
    with pytest.raises(MetroError, match="is unknown"):
        Measured.of(1.0, "m").expanded()


def test_round_trips():
    for measured in (
        Measured.of(1.5, "m/V", 0.1, 7.5),
        Measured.of(1.5, "m/V"),
        Measured.of(np.array([1.0, 2.0]), "V", np.array([0.1, 0.2]), 3),
    ):
        assert Measured.from_dict(measured.to_dict(with_dof=True)) == measured
        assert pickle.loads(pickle.dumps(measured)) == measured  # noqa: S301  # our own bytes
    with pytest.raises(MetroError, match="a quantity must have value, unit and u"):
        Measured.from_dict({"value": 1.0})


def test_relative():
    assert Measured.of(-2.0, "m", 0.1).relative_u == pytest.approx(0.05)
    assert Measured.of(2.0, "m").relative_u is None
    assert Measured.of(0.0, "m", 0.1).relative_u == math.inf


@pytest.mark.parametrize(
    ("value", "unit", "half_width", "text"),
    [
        (35.2e-9, "m/V", 0.1e-9, "35.2 nm/V, U = 0.1 nm/V (95 %)"),
        (35.2e-9, "m/V", 0.098e-9, "35.200 nm/V, U = 0.098 nm/V (95 %)"),
        (35.24321e-9, "m/V", 0.0995e-9, "35.24 nm/V, U = 0.10 nm/V (95 %)"),
        (-35.2e-9, "m/V", 12e-9, "-35 nm/V, U = 12 nm/V (95 %)"),
        (1e-12, "m", 5e-9, "0 nm, U = 5 nm (95 %)"),
        (0.99999e-6, "m", 1e-9, "1.000 µm, U = 0.001 µm (95 %)"),
        (4e-18, "m", 1e-20, "4.00 am, U = 0.01 am (95 %)"),
        (4e-21, "m", 1e-23, "0.00400 am, U = 0.00001 am (95 %)"),
        (0.982, "1", 0.004, "0.982, U = 0.004 (95 %)"),
        (1e-21, "1", 1e-23, "1.000e-21, U = 1.0e-23 (95 %)"),
        (3.2e-15, "m/Hz**0.5", 1.1e-15, "3.2 fm/√Hz, U = 1.1 fm/√Hz (95 %)"),
        (2.5e6, "V/m", 1e4, "2.50 MV/m, U = 0.01 MV/m (95 %)"),
        (4e3, "s", 10, "4000 s, U = 10 s (95 %)"),
        (0.37, "rad", 0.0012, "370.0 mrad, U = 1.2 mrad (95 %)"),
        (62e3, "ohm", 2e2, "62.0 kΩ, U = 0.2 kΩ (95 %)"),
        (1e-8, "V**2/Hz", 1e-9, "1.00e-08 V²/Hz, U = 1.0e-09 V²/Hz (95 %)"),
    ],
)
def test_how_people_read_it(value, unit, half_width, text):
    measured = Measured.of(value, unit, half_width / Measured.of(1.0, "1").coverage_factor(0.95))
    shown = str(measured)
    assert "±" not in shown
    assert shown == text


def test_how_people_read_what_is_not_known():
    assert str(Measured.of(35.2e-9, "m/V")) == "35.2 nm/V, U unknown"
    assert str(Measured.of(math.nan, "m", 1.0)) == "unknown, U unknown"
    assert str(Measured.of(1.0, "1", 0.0)) == "1, U = 0 (95 %)"
    assert str(Measured.of(0.0, "m", 1e-9)) == "0 nm, U = 2 nm (95 %)"
