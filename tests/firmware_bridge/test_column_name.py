"""Names and units of columns, as headers write them (quantity/unit after ISO 80000-1, from memory)."""

import pytest

from firmware_bridge.column_name import bare_name, split_header, split_headers
from firmware_bridge.errors import BridgeError
from firmware_bridge.opening import open_recording
from firmware_bridge.unit_word import is_unit_word, si_unit

UNITS = {
    "V": ("V", 1.0),
    "mV": ("V", 1e-3),
    "uA": ("A", 1e-6),
    "nm": ("m", 1e-9),
    "counts": ("1", 1.0),
}
NAMES = [
    "pd",
    "PD",
    "dac",
    "ref",
    "dc",
    "ac",
    "ch",
    "adc",
    "pin",
    "min max",
    "drive",
    "photodiode 1",
    "U",
]
FORMS = [
    "{}/{}",
    "{} / {}",
    "{} /{}",
    "{}/ {}",
    "{} ({})",
    "{}({})",
    "{} [{}]",
    "{}[{}]",
    "{} in {}",
]


@pytest.mark.parametrize("form", FORMS)
@pytest.mark.parametrize("name", NAMES)
def test_a_header_with_a_unit(form, name):
    for unit, (si, factor) in UNITS.items():
        got = split_header(form.format(name, unit))
        assert got == (name, unit)
        assert si_unit(got[1]) == (si, pytest.approx(factor), 0.0)


@pytest.mark.parametrize(
    "header",
    ["a/b", "in/out", "left/right", "CH1/CH2", "A/D", "x/y", "S/N", "dV/dt", "pd (x)", "gain (dBm)",
     "on/off", "p/q", "pd/V/old", "pd", "3", "", "A/B", "run 3/4", "pd_V"],
)  # fmt: skip
def test_a_header_without_one_stays(header):
    assert split_header(header) == (header, "")


@pytest.mark.parametrize(
    "unit",
    ["V/Hz", "m/s", "V/√Hz", "m/Hz**0.5", "nm/V", "counts/V", "V/rad", "mV/mT", "pC/N", "kg*m/s^2",
     "W/m**2", "1/s", "umol/mol", "kohm/V", "pm/√Hz", "µV/√Hz", "volt per second"],
)  # fmt: skip
def test_compound_units_are_units(unit):
    assert is_unit_word(unit)
    assert split_header(f"pd [{unit}]") == ("pd", unit)


@pytest.mark.parametrize(
    "word", ["pd/V", "dac/V", "dc/V", "ac/mV", "pin/V", "ch/V", "PD/nA", "t/s"]
)
def test_chance_readings_are_no_units(word):
    # the unit registry knows picodays, ten speeds of light, picoinches, chains, tonnes
    assert not is_unit_word(word)


def test_columns_that_only_units_tell_apart_keep_their_headers():
    headers = ["t/s", "pd (V)", "pd (mV)", "drive/V", "x", "x"]
    names, units = split_headers(headers)
    assert names == ["t", "pd (V)", "pd (mV)", "drive", "x", "x"]
    assert units == ["s", "V", "mV", "V", "", ""]
    assert bare_name("drive/V", names) == bare_name("drive [V]", names) == "drive"
    assert bare_name("pd (V)", names) == "pd (V)"
    assert bare_name("a/V", names) == "a/V"


@pytest.mark.parametrize("time", ["t", "t/s", "time [s]"])
@pytest.mark.parametrize("form", FORMS[:-1])
def test_files_are_found_by_name_and_by_header(tmp_path, time, form):
    path = tmp_path / "scope.csv"
    pd, drive = form.format("pd", "V"), form.format("drive", "mV")
    rows = "".join(f"{k / 1000},{1 + k % 3},{k % 7}\n" for k in range(50))
    path.write_text(f"{time},{pd},{drive}\n{rows}", encoding="utf-8")
    recording = open_recording(str(path))
    assert [channel.name for channel in recording.channels] == ["pd", "drive"]
    assert [channel.unit for channel in recording.channels] == ["V", "V"]
    for name in ("drive", drive, "drive (mV)", "3"):
        trace = recording.trace(name)
        assert trace.values[:3].tolist() == pytest.approx([0.0, 1e-3, 2e-3])
    assert len(open_recording(str(path), time=time).trace("pd").values) == 50
    with pytest.raises(BridgeError, match="no channel named 'pd2'"):
        recording.trace("pd2")
