"""``midfringe expect``: the figures it must give, what it says, and what it loads."""

import json
import re
import subprocess
import sys
import time

import pytest

from metro.commandline import run

STAGES = ("strain", "displacement", "phase", "fringes", "power", "current", "voltage", "counts")


@pytest.fixture(autouse=True)
def no_bench(monkeypatch):
    monkeypatch.delenv("MIDFRINGE_BENCH", raising=False)


def expect(capsys, *arguments):
    code = run(["expect", "--json", *arguments])
    captured = capsys.readouterr()
    assert (code, captured.err) == (0, "")
    return json.loads(captured.out)


def test_kilometre_arms(capsys):
    document = expect(capsys, "--strain", "1e-21", "--arm", "4km", "--wavelength", "1064nm")
    stages = document["stages"]
    assert tuple(stages) == STAGES
    assert stages["displacement"]["value"] == pytest.approx(4e-18, rel=1e-14)
    assert stages["displacement"]["unit"] == "m"
    assert stages["phase"]["value"] == pytest.approx(4.724199479e-11, rel=1e-10)
    assert stages["phase"]["u"] is None
    assert stages["power"] is stages["counts"] is None
    assert "power is unknown: give --power" in document["cautions"]


def test_half_a_metre(capsys):
    document = expect(capsys, "--strain", "1e-21", "--arm", "0.5m", "--wavelength", "632.8nm")
    assert document["stages"]["phase"]["value"] == pytest.approx(9.929180321e-15, rel=1e-10)


def test_a_nanometre(capsys):
    document = expect(capsys, "--displacement", "1nm", "--wavelength", "632.8nm")
    assert document["stages"]["phase"]["value"] == pytest.approx(0.0198583606422, rel=1e-11)
    assert document["stages"]["fringes"]["value"] == pytest.approx(0.0031605562579, rel=1e-11)


def test_shot_noise(capsys):
    document = expect(
        capsys, "--displacement", "1pm", "--wavelength", "632.8nm", "--power", "80uW",
        "--quantum-efficiency", "1", "--contrast", "1",
    )  # fmt: skip
    shot = document["noise"]["shot"]
    assert (shot["value"], shot["unit"]) == (pytest.approx(4.460995e-15, rel=1e-7), "m/Hz**0.5")
    assert document["noise"]["total"]["value"] == shot["value"]
    assert document["noise"]["johnson"] is None
    snr = document["snr"]
    assert snr["value"]["value"] == pytest.approx(1e-12 / 4.460995e-15, rel=1e-6)
    assert (snr["duration"]["value"], snr["noise"]["value"]) == (1.0, shot["value"])


def test_every_stage_from_every_stage(capsys):
    bench = ["--arm", "0.42m", "--wavelength", "632.9908nm", "--power", "80uW", "--responsivity", "0.4A/W",
             "--transimpedance", "62kohm", "--adc-bits", "16", "--adc-range", "10V"]  # fmt: skip
    first = expect(capsys, "--displacement", "1nm", *bench)["stages"]
    for stage in ("strain", "phase", "fringes", "voltage", "counts"):
        unit = {"phase": "rad", "voltage": "V"}.get(stage, "")
        again = expect(capsys, f"--{stage}", f"{first[stage]['value']!r}{unit}", *bench)["stages"]
        for name in STAGES:
            assert again[name]["value"] == pytest.approx(first[name]["value"], rel=1e-12)


def test_working_point_and_slopes(capsys):
    bench = ["--displacement", "1nm", "--wavelength", "633nm", "--low", "0.5V", "--high", "10V"]
    rising = expect(capsys, *bench)
    assert rising["working_point"]["phase"]["value"] == pytest.approx(-1.5707963267948966)
    assert rising["working_point"]["slope"] == {
        "value": pytest.approx(4.75),
        "unit": "V/rad",
        "u": None,
    }
    assert rising["working_point"]["voltage"]["value"] == 5.25
    falling = expect(capsys, *bench, "--slope", "falling")
    assert falling["stages"]["voltage"]["value"] == pytest.approx(
        -rising["stages"]["voltage"]["value"]
    )
    top = expect(capsys, *bench, "--working-phase", "0rad")
    assert top["stages"]["voltage"]["value"] == 0.0
    assert top["conventions"]["working_point"].endswith("from this detector's maximum, an extreme")
    assert json.dumps(top["working_point"]["slope"]["value"]) == "0.0"


def test_corrections(capsys):
    document = expect(
        capsys, "--strain", "0.1", "--arm", "0.5m", "--frequency", "100MHz", "--theta", "60deg", "--phi", "30deg"
    )  # fmt: skip
    corrections = document["corrections"]
    assert corrections["proper_length"]["differential"]["value"] == pytest.approx(
        1.2555012e-3, abs=1e-10
    )
    assert corrections["arm_travel_time"]["magnitude"]["value"] == pytest.approx(0.826767, abs=5e-7)
    assert corrections["direction"]["plus"]["value"] == pytest.approx(0.3125)
    assert corrections["direction"]["cross"]["value"] == pytest.approx(0.43301270189222)
    assert "plus_at_frequency" in corrections["direction"]


def test_compression_of_six_lines(capsys):
    document = expect(capsys, "--phase", "0.2rad", "--lines", "6")
    assert document["corrections"]["compression"]["loss"]["value"] == pytest.approx(0.054, abs=5e-4)
    small = expect(capsys, "--phase", "1e-9rad")["corrections"]["compression"]
    assert small["loss"]["value"] == pytest.approx(1e-18 / 8)


def test_readout_correction(capsys, tmp_path):
    bench = tmp_path / "bench.toml"
    bench.write_text('[photodiode]\nbandwidth = "5 kHz"\n[adc]\nantialias = "1.5 kHz"\n')
    document = expect(capsys, "--phase", "1mrad", "--bench", str(bench), "--frequency", "1kHz")
    expected = abs(1 / (1 + 0.2j) / (1 + 1j / 1.5))
    assert document["corrections"]["readout"]["magnitude"]["value"] == pytest.approx(expected)


def test_cautions(capsys):
    cautions = expect(capsys, "--displacement", "1nm", "--wavelength", "632.8nm")["cautions"]
    assert "632.9908 nm" in cautions[0]
    assert cautions[1].startswith("no air entry: the arms are taken to be in vacuum")
    air = ["--temperature", "20degC", "--pressure", "101325Pa", "--humidity", "50%"]
    document = expect(capsys, "--displacement", "1nm", "--wavelength", "632.9908nm", *air)
    assert not any("632.8" in c or "vacuum" in c for c in document["cautions"])
    assert "1.000271373" in document["conventions"]["phase"]
    assert "Ciddor" in document["conventions"]["phase"]
    assert document["stages"]["phase"]["u"] > 0
    big = expect(capsys, "--displacement", "100nm", "--wavelength", "633nm")["cautions"]
    assert any("beyond the linear range" in c for c in big)


def test_page_for_people(capsys, tmp_path):
    bench = tmp_path / "bench.toml"
    bench.write_text(
        '[laser]\nwavelength = { value = "632.99 nm", u = "1 pm" }\n[air]\nmedium = "vacuum"\n'
    )
    assert run(["expect", "--displacement", "1nm", "--bench", str(bench)]) == 0
    lines = capsys.readouterr().out.splitlines()
    assert lines[:4] == [
        "stage         change",
        "strain        unknown",
        "displacement  1 nm",
        "phase         19.852400 mrad, U = 0.000061 mrad (95 %)",
    ]
    assert f"the bench         value                from {bench}" in lines
    assert "laser.wavelength  632.99 nm, u = 1 pm  [laser] wavelength" in lines


def test_the_page_ends_in_short(capsys):
    """1 nm at 632.9908 nm in vacuum is 4π·1/632.9908 rad; text lines fit a terminal."""
    air = ("--arm", "0.42m", "--wavelength", "632.9908nm", "--power", "80uW")
    assert run(["expect", "--displacement", "1nm", *air, "--responsivity", "0.41A/W"]) == 0
    page = capsys.readouterr().out
    heads = ["stage ", "working point", "noise ", "signal to noise", "corrections", "conventions"]
    heads += ["the bench", "cautions", "in short"]
    sections = page.split("\n\n")
    assert [text.startswith(head) for text, head in zip(sections, heads, strict=True)] == [True] * 9
    assert max(map(len, page.splitlines())) <= 118
    short = sections[-1].splitlines()
    assert short[1] == "  strain 2.381e-09 ↔ displacement 1 nm ↔ phase 19.85 mrad"
    assert re.fullmatch(r"  signal to noise .+ after 1 s; by then .+ fm reaches 1", short[2])


def test_out_file(capsys, tmp_path):
    path = tmp_path / "expectation.json"
    assert run(["expect", "--phase", "1mrad", "--out", str(path)]) == 0
    assert json.loads(path.read_text())["stages"]["phase"]["value"] == 1e-3
    capsys.readouterr()
    assert run(["expect", "--phase", "1mrad", "--out", str(path)]) == 2
    assert capsys.readouterr().err == f"midfringe: {path} exists; give --overwrite to replace it\n"


@pytest.mark.parametrize(
    ("arguments", "message"),
    [
        (["--arm", "0.5"], "--arm must have a unit of length (such as '0.5 m'), got '0.5'"),
        (["--arm", "3kg"], "--arm must have a unit of length (such as '0.5 m'), got '3kg'"),
        (["--arm", "-1m"], "--arm must be > 0.0 m, got '-1m'"),
        (["--wavelength", "nan"], "--wavelength must be a finite number, got 'nan'"),
        (
            ["--wavelength", "1,5um"],
            "--wavelength must be written with a decimal point, not a comma, got '1,5um'",
        ),
        (["--phase", "1rad"], "exactly one of --strain, --displacement, --phase, --fringes, --voltage, --counts must be given, got --strain and --phase"),
        (["--frequency", "0Hz"], "--frequency must be > 0.0 Hz, got '0Hz'"),
        (["--temperature", "20degC"], 'the bench must give air.pressure: write pressure = "101325 Pa" under [air] or give --pressure'),
    ],
)  # fmt: skip
def test_wrong_input_is_one_line(capsys, arguments, message):
    assert run(["expect", "--strain", "1e-21", "--wavelength", "633nm", *arguments]) == 2
    captured = capsys.readouterr()
    assert (captured.out, captured.err) == ("", f"midfringe: {message}\n")


def test_nothing_given(capsys):
    assert run(["expect"]) == 2
    assert capsys.readouterr().err == (
        "midfringe: exactly one of --strain, --displacement, --phase, --fringes, --voltage, --counts"
        " must be given, got none\n"
    )


def loaded_by(code):
    done = subprocess.run([sys.executable, "-c", code], capture_output=True, text=True, check=True)
    return set(done.stdout.split())


def test_expect_loads_no_fitting_code():
    arguments = ["expect", "--strain", "1e-21", "--arm", "4km", "--wavelength", "1064nm"]
    code = f"import sys\nfrom metro.commandline import run\nrun({arguments!r})\nprint(*sys.modules)"
    modules = loaded_by(code)
    assert "metro.expectation" in modules
    for heavy in (
        "scipy",
        "matplotlib",
        "h5py",
        "serial",
        "calibration",
        "firmware_bridge",
    ):
        assert heavy not in modules


def test_the_kernel_loads_neither_numpy_nor_pint():
    names = "air antenna arms beam bessel cavity constants contrast fringe humidity light lines noise phase photodiode ports strain student"
    code = "import sys\nimport metro.kernel\n"
    code += "".join(f"import metro.kernel.{name}\n" for name in names.split())
    modules = loaded_by(code + "print(*sys.modules)")
    for heavy in ("numpy", "pint", "click", "dataclasses", "typing_extensions"):
        assert heavy not in modules


@pytest.mark.slow
def test_start_up_time():
    """A whole `expect` against importing numpy and pint and building pint's own registry."""
    base = [sys.executable, "-c", "import numpy, pint; pint.UnitRegistry()"]
    ours = [sys.executable, "-m", "metro", "expect", "--strain", "1e-21", "--arm", "4km"]

    def best(command):
        times = []
        for _ in range(7):
            start = time.perf_counter()
            subprocess.run(command, capture_output=True, check=True)
            times.append(time.perf_counter() - start)
        return min(times)

    assert best(ours) < 1.25 * best(base)


def test_wanted_ratio(capsys):
    bench = [
        "--displacement",
        "1pm",
        "--wavelength",
        "632.8nm",
        "--power",
        "80uW",
        "--quantum-efficiency",
        "1",
    ]
    once = expect(capsys, *bench)["snr"]
    more = expect(capsys, *bench, "--snr", "100", "--duration", "4s", "--arm", "0.5m")
    snr = more["snr"]
    assert snr["detectable_displacement"]["value"] == pytest.approx(
        100 * 4.460995e-15 / 2, rel=1e-6
    )
    assert snr["detectable_strain"]["value"] == pytest.approx(100 * 4.460995e-15, rel=1e-6)
    assert snr["time_wanted"]["value"] == pytest.approx(1e4 * once["time_wanted"]["value"])
    assert more["noise_strain"]["shot"]["value"] == pytest.approx(4.460995e-15 / 0.5, rel=1e-6)


def test_plot(capsys, tmp_path):
    pytest.importorskip("matplotlib")
    path = tmp_path / "noise.svg"
    arguments = ["expect", "--displacement", "1pm", "--wavelength", "632.8nm", "--power", "80uW",
                 "--responsivity", "0.4A/W", "--arm", "0.5m", "--plot", str(path)]  # fmt: skip
    assert run(arguments) == 0
    assert path.read_text().startswith("<?xml")
    capsys.readouterr()
    assert run([*arguments[:-1], str(tmp_path / "noise.gif")]) == 2
    captured = capsys.readouterr()
    assert captured.out == ""
    assert captured.err.startswith("midfringe: --plot must end in .png, .pdf or .svg, got ")


def test_no_plot_without_any_noise(capsys, tmp_path):
    pytest.importorskip("matplotlib")
    plot, out = tmp_path / "noise.png", tmp_path / "expectation.json"
    arguments = ["--displacement", "1pm", "--wavelength", "633nm", "--out", str(out)]
    assert run(["expect", *arguments, "--plot", str(plot)]) == 2
    captured = capsys.readouterr()
    assert (captured.out, captured.err.count("\n")) == ("", 1)
    assert captured.err.startswith(
        "midfringe: --plot has nothing to draw, no noise is known; needed: "
    )
    assert list(tmp_path.iterdir()) == []


def test_storage_and_coherence_among_the_corrections(capsys, tmp_path):
    bench = tmp_path / "bench.toml"
    bench.write_text(
        '[laser]\nwavelength = "1064 nm"\nlinewidth = "1 MHz"\n'
        '[arms]\nlength = "4 km"\nmismatch = "1 m"\ninput_reflectance = 0.97\n'
    )
    corrections = expect(
        capsys, "--strain", "1e-21", "--bench", str(bench), "--frequency", "90.87Hz"
    )["corrections"]
    assert corrections["arm_storage"]["magnitude"]["value"] == pytest.approx(0.7071, abs=1e-3)
    assert corrections["arm_storage"]["pole"]["value"] == pytest.approx(90.87, abs=0.05)
    assert 0 < corrections["coherence"]["contrast"]["value"] < 1


def test_a_fringe_too_large_for_the_converter(capsys):
    bench = ["--low", "0V", "--high", "4V", "--adc-range", "3.3V"]
    cautions = expect(capsys, "--phase", "1mrad", *bench)["cautions"]
    assert any(
        c.startswith("the fringe, 4 V from end to end, does not fit the converter's 3.3 V")
        for c in cautions
    )


def test_length_strain_of_one_arm_is_another_quantity(capsys):
    stages = expect(capsys, "--length-strain", "10ppm", "--arm", "0.5m", "--wavelength", "633nm")[
        "stages"
    ]
    assert stages["displacement"]["value"] == pytest.approx(5e-6)
    assert run(["expect", "--length-strain", "1", "--strain", "1", "--arm", "1m"]) == 2
    assert capsys.readouterr().err.endswith("got --strain and --length-strain\n")


def test_where_strain_times_length_is_not_enough(capsys):
    arguments = ["--strain", "0.1", "--arm", "0.5m", "--frequency", "100MHz", "--theta", "90deg"]
    cautions = expect(capsys, *arguments)["cautions"]
    assert cautions[-3:] == [
        "strain times length is not enough: the arms' response is 0.826767",
        "the stages hold for a wave from above; from this direction the response is 0.5 (plus), 0 (cross)",
        "first order leaves out -0.0238 of the x arm's change and 0.00126 of the differential",
    ]
    quiet = expect(capsys, "--strain", "1e-21", "--arm", "0.5m", "--frequency", "100Hz")["cautions"]
    assert not any("enough" in c or "first order" in c for c in quiet)


def test_air_without_a_wavelength(capsys):
    air = ["--temperature", "20degC", "--pressure", "101325Pa"]
    document = expect(capsys, "--strain", "1e-21", "--arm", "4km", *air)
    assert document["stages"]["displacement"]["value"] == pytest.approx(4e-18)
    assert "which needs a wavelength" in document["conventions"]["phase"]
    assert any(c.startswith("no humidity given") for c in document["cautions"])
