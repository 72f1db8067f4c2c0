"""The bench file: what is read, where it came from, and what is refused in which words."""

import math
import tomllib

import pytest

from metro.bench import Bench, BenchError, BenchLine, load_bench
from metro.bench_keys import KEYS, LINE_KEYS, OPTIONS
from metro.bench_values import read_sections
from metro.measured import Measured
from metro.units import quantity

GOOD = """
[laser]
wavelength = { value = "632.99 nm", u = "0.001 nm", source = "wavemeter certificate 17" }
power = "80 uW"
source = "He-Ne, unstabilised"
relative_intensity_noise = "1e-7 /√Hz"
[arms]
length = "0.42 m"
round_trips = 1
contrast = 0.93
[air]
temperature = { value = "21.3 °C", u = "0.3 °C" }
pressure = { value = "1004 hPa", u = "0.1%" }
humidity = { value = "41%", u = "5%" }
[adc]
bits = 16
channel_delay = { value = "12 us", u = "0.5 us", distribution = "rectangular" }
reference = { value = 0, u = "0.15%" }
[actuator]
arm = "y"
polarity = -1
[drive]
point = "amplifier input"
channel = 2
[mains]
frequency = "60 Hz"
[[line]]
frequency = "31.7 Hz"
drive = { value = "0.28 V", u = "1 mV" }
[[line]]
frequency = "100 rad/s"
"""


@pytest.fixture
def bench(tmp_path):
    path = tmp_path / "bench.toml"
    path.write_text(GOOD, encoding="utf-8")
    return load_bench(path)


def test_values_are_si(bench):
    assert bench.magnitude("laser.wavelength") == 6.3299e-7
    assert bench.u("laser.wavelength") == pytest.approx(1e-12)
    assert bench.magnitude("air.temperature") == pytest.approx(294.45)
    assert bench.u("air.temperature") == 0.3
    assert bench.u("air.pressure") == pytest.approx(100.4)
    assert (bench.magnitude("air.humidity"), bench.u("air.humidity")) == (0.41, 0.05)
    assert bench.u("adc.reference") == pytest.approx(0.0015)
    assert bench.magnitude("actuator.polarity") == -1.0
    assert bench.get("arms.mismatch") is None
    assert bench.u("arms.mismatch") == 0.0
    assert bench.u("arms.length") == 0.0
    assert bench.magnitude("arms.mismatch", 0.0) == 0.0


def test_texts_distributions_and_lines(bench):
    assert bench.text("actuator.arm") == "y"
    assert bench.text("drive.channel") == "2"
    assert bench.text("drive.reading") is None
    assert bench.distribution("adc.channel_delay") == "rectangular"
    assert bench.distribution("laser.power") == "normal"
    first, second = bench.lines
    assert first == BenchLine(31.7, 0.28, 1e-3)
    assert second == BenchLine(pytest.approx(100 / (2 * math.pi)), None, 0.0)


def test_where_values_came_from(bench):
    assert bench.source("laser.wavelength").endswith("bench.toml, [laser] wavelength")
    assert bench.source("arms.mismatch") == "not given"
    over = bench.override({"arm": "1 m", "power": None})
    assert over.source("arms.length") == "option --arm"
    assert over.magnitude("arms.length") == 1.0
    assert bench.magnitude("arms.length") == 0.42
    rows = {key: (text, source) for key, text, source in over.provenance()}
    assert rows["arms.length"] == ("1 m", "option --arm")
    assert rows["air.temperature"][0] == "21.3 °C, u = 0.3 °C"
    assert rows["laser.source"][0] == "He-Ne, unstabilised"
    assert [key for key in rows if "." in key] == [key for key in KEYS if key in rows]
    assert [key for key in rows if "." not in key] == [
        f"line {number}" for number in range(1, len(over.lines) + 1)
    ]
    assert rows["line 1"][1].endswith("bench.toml, [[line]]")


def test_without_a_file():
    bench = Bench.of(
        arm="0.5 m", wavelength=quantity(632.8, "nm"), round_trips=2, adc__rate="1 kHz"
    )
    assert bench.magnitude("laser.wavelength") == 6.328e-7
    assert bench.magnitude("adc.rate") == 1000.0
    assert bench.source("arms.length") == "argument arm"
    assert bench.in_vacuum
    assert bench.index().to_dict() == {"value": 1.0, "unit": "1", "u": 0.0}
    with pytest.raises(
        BenchError, match="the bench has no value 'arms'; the nearest known is 'arm'"
    ):
        Bench.of(arms="0.5 m")


def test_replace(bench):
    new = bench.replace({"laser.wavelength": Measured.of(6.33e-7, "m", 1e-13)})
    assert new.magnitude("laser.wavelength") == 6.33e-7
    assert new.u("laser.wavelength") == 1e-13
    assert new.lines == bench.lines
    delay = bench.replace({"adc.channel_delay": Measured.of(1e-6, "s")})
    assert delay.distribution("adc.channel_delay") == "rectangular"
    with pytest.raises(BenchError, match=r"laser.wavelength must be in m, got V"):
        bench.replace({"laser.wavelength": Measured.of(1.0, "V")})
    with pytest.raises(
        BenchError, match=r"no key 'laser.wavelenght'; the nearest known is 'laser.wa"
    ):
        bench.replace({"laser.wavelenght": Measured.of(1.0, "m")})


def test_what_is_missing_is_named_with_an_example(bench):
    with pytest.raises(BenchError) as caught:
        bench.magnitude("photodiode.responsivity")
    assert str(caught.value).endswith(
        "bench.toml: the bench must give photodiode.responsivity: write "
        'responsivity = "0.4 A/W" under [photodiode] or give --responsivity'
    )
    with pytest.raises(BenchError) as caught:
        Bench().magnitude("adc.rate")
    assert str(caught.value) == ('the bench must give adc.rate: write rate = "10 kHz" under [adc]')
    with pytest.raises(BenchError, match=r"the bench must give air.pressure"):
        Bench.of(temperature="20 degC", wavelength="633 nm").index()


def test_index_in_vacuum_and_given(tmp_path):
    path = tmp_path / "b.toml"
    path.write_text('[air]\nmedium = "vacuum"\n')
    assert load_bench(path).index().magnitude == 1.0
    path.write_text("[air]\nindex = { value = 1.00027, u = 1e-6 }\n")
    assert load_bench(path).index().to_dict() == {"value": 1.00027, "unit": "1", "u": 1e-6}
    path.write_text('[air]\nmedium = "vacuum"\n')
    with pytest.raises(BenchError) as caught:
        load_bench(path).override({"temperature": "20 degC"})
    assert str(caught.value) == (
        f"--temperature has no use: the arms are in vacuum ({path}, [air] medium)"
    )


def test_the_index_carries_the_uncertainty_of_the_air(bench):
    index = bench.index()
    assert 1.0002 < index.magnitude < 1.0003
    # 1 K changes n - 1 by about 1e-6 and 100 Pa by 2.7e-7 (common practice): u must be near 4e-7
    assert 2e-7 < index.u_magnitude < 6e-7


def test_every_key_accepts_its_own_example():
    for key, rule in KEYS.items():
        section, _, name = key.partition(".")
        bare = rule.example.startswith("{") or (rule.unit == "1" and "%" not in rule.example)
        bare = bare and " umol" not in rule.example
        value = rule.example if bare else f'"{rule.example}"'
        document = tomllib.loads(f"[{section}]\n{name} = {value}\n")
        entries, *_ = read_sections(document, "x.toml")
        assert list(entries) == [key]
    assert set(OPTIONS.values()) <= set(KEYS)
    assert set(LINE_KEYS) == {"frequency", "drive"}


BAD = [
    ('[lasre]\npower = "1 W"', ": unknown section [lasre]; the nearest known is 'laser'"),
    ("[zzz]\na = 1", None),
    (
        '[laser]\nwavelenght = "633 nm"',
        ", [laser]: unknown key 'wavelenght'; the nearest known is 'wavelength'",
    ),
    (
        "[laser]\nwavelength = 632.8",
        ", [laser] wavelength must have a unit of length (such as '0.5 m'), got 632.8",
    ),
    (
        '[laser]\nwavelength = "632.8"',
        ", [laser] wavelength must have a unit of length (such as '0.5 m'), got '632.8'",
    ),
    (
        '[laser]\nwavelength = "632,8 nm"',
        ", [laser] wavelength must be written with a decimal point, not a comma, got '632,8 nm'",
    ),
    ('[laser]\nwavelength = "-633 nm"', ", [laser] wavelength must be > 0.0 m, got '-633 nm'"),
    ("[laser]\nwavelength = true", None),
    ("[laser]\nwavelength = [1, 2]", None),
    ("[laser]\nwavelength = 2024-01-01", None),
    ("[laser]\nwavelength = inf", None),
    ('[laser]\nwavelength = { u = "1 nm" }', None),
    (
        '[laser]\nwavelength = { value = "633 nm", uu = "1 nm" }',
        ", [laser] wavelength: unknown key 'uu'; the nearest known is 'u'",
    ),
    (
        '[laser]\nwavelength = { value = "633 nm", u = 0.1 }',
        ", [laser] wavelength u must have a unit of length (such as '0.5 m'), got 0.1",
    ),
    ('[laser]\nwavelength = { value = "633 nm", u = "0.1" }', None),
    ('[laser]\nwavelength = { value = "633 nm", u = "-1 pm" }', None),
    ('[laser]\nwavelength = { value = "633 nm", u = "nan nm" }', None),
    ('[laser]\nwavelength = { value = "633 nm", u = "1 s" }', None),
    (
        '[laser]\nwavelength = { value = "633 nm", u = "1 pm", distribution = "gauss" }',
        ", [laser] wavelength: distribution must be 'normal' or 'rectangular', got 'gauss'",
    ),
    ('[laser]\nwavelength = { value = "633 nm", source = 3 }', None),
    ("[laser]\nsource = 1.5", None),
    ("laser = 3", ": laser must be a section [laser], got 3"),
    ("[arms]\nround_trips = 1.5", ", [arms] round_trips must be a whole number, got 1.5"),
    ("[arms]\nround_trips = 0", ", [arms] round_trips must be ≥ 1.0, got 0"),
    ("[arms]\ncontrast = 1.2", ", [arms] contrast must be ≤ 1.0, got 1.2"),
    ("[arms]\ncontrast = 0", None),
    ('[arms]\nlength = "3 kg"', None),
    ('[air]\ntemperature = "-300 degC"', None),
    ("[air]\nhumidity = 50", ", [air] humidity must be ≤ 1.0, got 50"),
    ('[air]\nequation = "cidor"', None),
    (
        '[air]\nmedium = "helium"',
        ", [air] medium must be 'vacuum' or 'air', got 'helium'",
    ),
    ("[adc]\nbits = 0", None),
    ("[adc]\nbits = 12.5", None),
    ('[adc]\nrange = "10 A"', None),
    ('[actuator]\narm = "z"', ", [actuator] arm must be 'x' or 'y', got 'z'"),
    ("[actuator]\npolarity = 0", ", [actuator] polarity must be +1 or -1, got 0"),
    ("[actuator]\npolarity = 2", ", [actuator] polarity must be +1 or -1, got 2"),
    ("[actuator]\npolarity = 0.5", ", [actuator] polarity must be +1 or -1, got 0.5"),
    ('[drive]\nreading = "pp"', None),
    (
        '[drive]\ndivider = { value = 10, u = "0.15%" }',
        ", [drive] divider u must be a bare number, as the value 10 is, got '0.15%'",
    ),
    (
        '[adc]\noffset = { value = "0 V", u = "1%" }',
        ", [adc] offset u must be in V, as a share of 0 is nothing, got '1%'",
    ),
    (
        '[fringe]\nlow = "3 V"\nhigh = "1 V"',
        None,
    ),
    ('[line]\nfrequency = "1 Hz"', None),
    ('[[line]]\ndrive = "1 V"', None),
    ('[[line]]\nfrequency = "1 Hz"\n[[line]]\nfrequency = "2 s"', None),
    (
        '[[line]]\nfreqency = "1 Hz"',
        ", [[line]] 1: unknown key 'freqency'; the nearest known is 'frequency'",
    ),
    ('[[line]]\nfrequency = "0 Hz"', None),
    ("format = 2", ": format must be 1, the only one this version reads, got 2"),
    ("[laser\n", None),
    ('[laser]\npower = "1 W"\npower = "2 W"', None),
]


def test_a_byte_order_mark_is_no_part_of_the_file(tmp_path):
    path = tmp_path / "bench.toml"
    path.write_bytes(b"\xef\xbb\xbf" + GOOD.encode())
    marked = load_bench(path)
    path.write_bytes(GOOD.encode())
    assert marked == load_bench(path)


@pytest.mark.parametrize(("text", "ending"), BAD, ids=lambda v: repr(v)[:40])
def test_refused_in_one_line(tmp_path, text, ending):
    path = tmp_path / "bench.toml"
    path.write_text(text, encoding="utf-8")
    with pytest.raises(BenchError) as caught:
        load_bench(path)
    message = str(caught.value)
    assert len(message.splitlines()) == 1
    assert "bench.toml" in message
    if ending is not None:
        assert message == f"{path}{ending}"


def test_files_that_cannot_be_read(tmp_path):
    with pytest.raises(BenchError, match=r"cannot read the bench file .*: no such file"):
        load_bench(tmp_path / "none.toml")
    with pytest.raises(BenchError, match=r"cannot read the bench file .*: is a directory"):
        load_bench(tmp_path)
    path = tmp_path / "latin.toml"
    path.write_bytes('[laser]\nsource = "Börse"'.encode("latin-1"))
    with pytest.raises(BenchError, match="is not UTF-8 text"):
        load_bench(path)


def test_the_arms_own_motion(tmp_path):
    path = tmp_path / "bench.toml"
    path.write_text(
        '[[motion]]\nfrequency = "87.1 Hz"\ndensity = "17 pm/√Hz"\n'
        '[[motion]]\nfrequency = "31.7 Hz"\ndensity = "40 pm/√Hz"\n',
        encoding="utf-8",
    )
    points = load_bench(path).motion
    assert [(p.frequency_hz, p.density_m) for p in points] == [(31.7, 40e-12), (87.1, 17e-12)]


@pytest.mark.parametrize(
    ("text", "message"),
    [
        ("[motion]", "the arms' motion must be written as [[motion]], got {}"),
        (
            '[[motion]]\nfrequency = "1 Hz"',
            '[[motion]] 1: must give a density, such as density = "40 pm/√Hz"',
        ),
        (
            '[[motion]]\nfrequncy = "1 Hz"',
            "[[motion]] 1: unknown key 'frequncy'; the nearest known is 'frequency'",
        ),
        (
            '[[motion]]\nfrequency = "1 Hz"\ndensity = "4 pm"',
            "[[motion]] 1 density must have a unit of length per square root of frequency",
        ),
        (
            '[[motion]]\nfrequency = "1 Hz"\ndensity = "4 pm/√Hz"\n' * 2,
            "[[motion]] is given twice at 1 Hz",
        ),
    ],
)
def test_motion_refused(tmp_path, text, message):
    path = tmp_path / "bench.toml"
    path.write_text(text, encoding="utf-8")
    with pytest.raises(BenchError) as caught:
        load_bench(path)
    assert message in str(caught.value)
