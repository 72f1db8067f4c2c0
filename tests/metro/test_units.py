"""Values with units: what is read, what is refused, and in which words."""

import math

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from metro.errors import MetroError
from metro.measured import Measured
from metro.unit_definitions import DEFINITIONS, SI_NAMES
from metro.unit_registry import registry
from metro.units import parse_quantity, quantity, si, split_value
from metro.value_text import spell_unit


@pytest.mark.parametrize(
    ("text", "number", "unit"),
    [
        ("42cm", 42.0, "cm"),
        ("632.8 nm", 632.8, "nm"),
        ("87.1Hz", 87.1, "Hz"),
        ("10 min", 10.0, "min"),
        ("-3pm", -3.0, "pm"),
        ("−3 pm", -3.0, "pm"),
        ("-40degC", -40.0, "degC"),
        ("1e-21", 1e-21, ""),
        ("1e3m", 1000.0, "m"),
        ("3 eV", 3.0, "eV"),
        (".5 m", 0.5, "m"),
        ("5. m", 5.0, "m"),
        ("+5m", 5.0, "m"),
        (" 5 m ", 5.0, "m"),
        ("1 pm/√Hz", 1.0, "pm/Hz**0.5"),
        ("1 m/sqrt(Hz)", 1.0, "m/Hz**0.5"),
        ("1 m/Hz^0.5", 1.0, "m/Hz**0.5"),
        ("1 m/Hz**(1/2)", 1.0, "m/Hz**0.5"),
        ("1e-8/√Hz", 1e-8, "/Hz**0.5"),
        ("20 °C", 20.0, "degC"),
        ("50%", 50.0, "percent"),
        ("80 µW", 80.0, "uW"),
        ("80 μW", 80.0, "uW"),
        ("20 kΩ", 20.0, "kohm"),
        ("450 umol/mol", 450.0, "umol/mol"),
        ("9.8 m/s²", 9.8, "m/s**2"),
    ],
)
def test_split(text, number, unit):
    assert split_value(text) == (number, unit)


@pytest.mark.parametrize(
    ("text", "unit", "expected"),
    [
        ("632.8 nm", "m", 6.328e-7),
        ("42cm", "m", 0.42),
        ("4 km", "m", 4000.0),
        ("-3pm", "m", -3e-12),
        ("10 min", "s", 600.0),
        ("5 ppm", "1", 5e-6),
        ("50%", "1", 0.5),
        ("450 umol/mol", "1", 4.5e-4),
        ("80 uW", "W", 8e-5),
        ("20 kohm", "V/A", 2e4),
        ("0.4 A/W", "A/W", 0.4),
        ("1004 hPa", "Pa", 100400.0),
        ("30 deg", "rad", math.pi / 6),
        ("1 fringe", "rad", 2 * math.pi),
        ("0.25 fringe", "fringe", 0.25),
        ("3.14159265358979 rad", "fringe", 0.5),
        ("12 counts", "count", 12.0),
        ("12", "count", 12.0),
        ("1 pm/√Hz", "m/Hz**0.5", 1e-12),
        ("35 nm/V", "m/V", 3.5e-8),
        ("1e-7 /√Hz", "1/Hz**0.5", 1e-7),
        ("1 kHz/√Hz", "Hz/Hz**0.5", 1000.0),
        ("21.5 degC", "K", 294.65),
        ("68 degF", "K", 293.15),
        ("1 nm/degC", "m/K", 1e-9),
    ],
)
def test_si(text, unit, expected):
    assert si(text, "value", unit) == pytest.approx(expected, rel=1e-14)


def test_decimal_prefixes_lose_no_digit():
    """1e-9 is no exact float: 632.8 nm must be the float 6.328e-7, not its neighbour."""
    assert si("632.8 nm", "value", "m") == 6.328e-7
    assert si("632.99 nm", "value", "m") == 6.3299e-7
    assert si("-40 degC", "value", "K") == 233.15
    assert si("4.35 hPa", "value", "Pa") == 435.0
    assert si("5 ppm", "value", "1") == 5e-6
    assert si("0.3 pm/√Hz", "value", "m/Hz**0.5") == 3e-13


def test_cycles_and_radians():
    """Hertz are cycles per second (SI brochure, 9th edition, table 4, note on rad/s)."""
    assert si("100 rad/s", "f", "Hz") == pytest.approx(100 / (2 * math.pi), rel=1e-15)
    assert si("100 Hz", "w", "rad/s") == pytest.approx(100 * 2 * math.pi, rel=1e-15)
    assert si("60 rpm", "f", "Hz") == pytest.approx(1.0, rel=1e-15)
    per_root = si(quantity(1.0, "m * second**0.5 / radian**0.5"), "d", "m/Hz**0.5")
    assert per_root == pytest.approx(math.sqrt(2 * math.pi), rel=1e-15)


def test_temperature_differences():
    assert si("0.3 degC", "u", "K", difference=True) == 0.3
    assert si("0.3 K", "u", "K", difference=True) == 0.3
    assert si("9 degF", "u", "K", difference=True) == pytest.approx(5.0)


def test_arrays():
    result = si(quantity(np.array([1.0, 2.0]), "nm"), "x", "m")
    assert result.dtype == np.float64
    np.testing.assert_array_equal(result, [1e-9, 2e-9])
    assert si(quantity(np.array([], dtype=float), "nm"), "x", "m").size == 0
    assert isinstance(si(quantity(np.float32(1.0), "nm"), "x", "m"), float)
    with pytest.raises(MetroError, match="x must be finite"):
        si(quantity(np.array([1.0, np.nan]), "nm"), "x", "m")
    with pytest.raises(MetroError, match="x must be > 0 m"):
        si(quantity(np.array([1.0, -1.0]), "nm"), "x", "m", above=0)


def test_a_quantity_of_another_registry_is_taken():
    pint = pytest.importorskip("pint")
    other = pint.UnitRegistry()
    assert si(other.Quantity(632.8, "nm"), "x", "m") == 6.328e-7
    assert si(other.Quantity(20, "degC"), "x", "K") == 293.15
    assert si(other.Quantity(1, "V/Hz**0.5"), "x", "V/Hz**0.5") == 1.0
    assert si(other.Quantity(0.5, ""), "x", "1") == 0.5


LENGTH = "arm must have a unit of length (such as '0.5 m'), got "
BAD = [
    ("0.5", "m", LENGTH + "'0.5'"),
    (0.5, "m", LENGTH + "0.5"),
    (None, "m", LENGTH + "None"),
    (True, "m", LENGTH + "True"),
    ("3kg", "m", LENGTH + "'3kg'"),
    ("3 s", "m", LENGTH + "'3 s'"),
    ("1 rad", "1", "arm must be a pure number (such as '0.5'), got '1 rad'"),
    ("1 m", "1", "arm must be a pure number (such as '0.5'), got '1 m'"),
    ("1", "rad", "arm must have a unit of angle (such as '0.02 rad'), got '1'"),
    ("50%", "rad", "arm must have a unit of angle (such as '0.02 rad'), got '50%'"),
    ("1 rad", "Hz", "arm must have a unit of frequency (such as '87.1 Hz'), got '1 rad'"),
    ("1 m*rad", "m", LENGTH + "'1 m*rad'"),
    ("nan", "m", "arm must be a finite number, got 'nan'"),
    ("NaN m", "m", "arm must be a finite number, got 'NaN m'"),
    ("inf m", "m", "arm must be a finite number, got 'inf m'"),
    ("-inf", "1", "arm must be a finite number, got '-inf'"),
    ("1e999 m", "m", "arm must be a finite number, got '1e999 m'"),
    ("1,5 mm", "m", "arm must be written with a decimal point, not a comma, got '1,5 mm'"),
    ("1,5", "1", "arm must be written with a decimal point, not a comma, got '1,5'"),
    (",5 mm", "m", "arm must be written with a decimal point, not a comma, got ',5 mm'"),
    ("1.000,5 m", "m", None),
    ("3 kg+1 kg", "m", None),
    ("3 m + 1 m", "m", None),
    ("3*2 m", "m", None),
    ("3/4 m", "m", None),
    ("2**3 m", "m", None),
    ("3 m 4 cm", "m", None),
    ("1_000 m", "m", None),
    ("0x10 m", "m", None),
    ("", "m", "arm must be one number and one unit (such as '632.8 nm'), got ''"),
    ("   ", "m", None),
    ("m", "m", "arm must be one number and one unit (such as '632.8 nm'), got 'm'"),
    ("five m", "m", None),
    ("--5 m", "m", None),
    ("5 m\n6 m", "m", None),
    ("5 (m)", "m", None),
    ("5 m;", "m", None),
    ("5 m**", "m", None),
    ("5 m//s", "m", None),
    ("5 'm'", "m", None),
    ("5 __import__('os')", "m", None),
    ("5 m**99999", "m", None),
    ("5 m**m", "m", None),
    ("5 nmm", "m", "arm has an unknown unit 'nmm' (nearest known: 'nm'), got '5 nmm'"),
    ("5 khz", "Hz", "arm has an unknown unit 'khz' (nearest known: 'kHz'), got '5 khz'"),
    ("5 furlong", "m", None),
    ("1 Vpp", "V", None),
    ("5 lambda", "m", None),
    ("5 if", "m", None),
]


@pytest.mark.parametrize(("value", "unit", "message"), BAD, ids=lambda v: repr(v)[:30])
def test_refused_in_one_line(value, unit, message):
    with pytest.raises(MetroError) as caught:
        si(value, "arm", unit)
    text = str(caught.value)
    assert text.startswith("arm ")
    assert len(text.splitlines()) == 1
    assert repr(value) in text
    if message is not None:
        assert text == message


@pytest.mark.parametrize(
    ("bounds", "message"),
    [
        ({"above": 0.0}, "arm must be > 0.0 m, got '-1 m'"),
        ({"minimum": 0.0}, "arm must be ≥ 0.0 m, got '-1 m'"),
        ({"maximum": -2.0}, "arm must be ≤ -2.0 m, got '-1 m'"),
        ({"below": -1.0}, "arm must be < -1.0 m, got '-1 m'"),
    ],
)
def test_ranges(bounds, message):
    with pytest.raises(MetroError) as caught:
        si("-1 m", "arm", "m", **bounds)
    assert str(caught.value) == message


def test_bounds_are_closed_and_open():
    assert si("1 m", "x", "m", minimum=1.0, maximum=1.0) == 1.0
    assert si("1 m", "x", "m", above=0.0, below=2.0) == 1.0


@given(st.floats(-1e12, 1e12), st.sampled_from(["nm", "m", "km", "um", "pm"]))
def test_units_round_trip(number, unit):
    back = quantity(si(f"{number!r} {unit}", "x", "m"), "m").to(unit).magnitude
    assert back == pytest.approx(number, rel=1e-14, abs=1e-300)


@given(st.text(max_size=12))
def test_any_text_is_read_or_refused_in_one_line(text):
    message, value = "", 0.0
    try:
        value = si(text, "x", "m")
    except MetroError as error:
        message = str(error)
    assert math.isfinite(value)
    assert len(message.splitlines()) <= 1


def test_every_definition_agrees_with_a_general_library():
    """pint's own definitions, which cite CODATA 2018 and NIST SP 811, against ours."""
    pint = pytest.importorskip("pint")
    theirs = pint.UnitRegistry()
    renamed = {"permille": "permille", "turn": "turn", "rpm": "rpm", "inch_Hg": "inHg"}
    ours = registry()
    for definition in DEFINITIONS:
        name = definition.split("=")[0].strip()
        if name.endswith("-") or name in {"fringe", "count", "bit", "ppb", "degree_Celsius"}:
            continue
        if name == "degree_Fahrenheit":
            continue
        mine, _ = ours.get_root_units(ours.parse_units(name), check_nonmult=False)
        other, _ = theirs.get_root_units(theirs.parse_units(renamed.get(name, name)))
        assert mine == pytest.approx(float(other), rel=1e-9), name
    for text in ("-40 degC", "21.3 degC", "-40 degF", "98.6 degF"):
        number, unit = split_value(text)
        expected = theirs.Quantity(number, unit).to("kelvin").magnitude
        assert quantity(number, unit).to("K").magnitude == pytest.approx(expected, rel=1e-14)
        assert si(text, "t", "K") == pytest.approx(expected, rel=1e-14)


def test_every_unit_has_its_si_form():
    names = {d.split("=")[0].split(";")[0].strip() for d in DEFINITIONS}
    assert {n for n in names if not n.endswith("-")} <= set(SI_NAMES)


def test_parse_quantity_keeps_the_unit():
    assert str(parse_quantity("632.8 nm").units) == "nanometer"
    assert spell_unit("m/√Hz") == "m/Hz**0.5"


def test_the_registry_is_built_without_a_warning(caplog):
    registry.__wrapped__()
    assert caplog.records == []


def test_radians_are_turned_into_cycles_only_beside_hertz():
    with pytest.raises(MetroError, match="speed must have a unit of"):
        si("1 m*rad/s", "speed", "m/s")


def test_a_measured_value_is_taken():
    assert si(Measured.of(1.5, "m", 0.1), "x", "m") == 1.5
    with pytest.raises(MetroError, match="x must have a unit of time"):
        si(Measured.of(1.5, "m", 0.1), "x", "s")


def test_quantities_made_from_text_are_read_with_care():
    import metro

    assert metro.Quantity("3 nm/√Hz").units == registry().parse_units("nm/Hz**0.5")
    assert metro.Quantity("632.8 nm").to("m").magnitude == pytest.approx(6.328e-7)
    assert metro.Quantity("20 °C").to("K").magnitude == pytest.approx(293.15)
    assert isinstance(quantity(1.0, "m"), metro.Quantity)
    with pytest.raises(MetroError, match="decimal point, not a comma, got '1,5 mm'"):
        metro.Quantity("1,5 mm")
