"""Bad values for every option of the core's commands: exit 2, one clear line, nothing else."""

import subprocess
import sys

import pytest

from metro.commandline import run

GOOD = {
    "expect": ["--displacement", "1pm", "--wavelength", "633nm"],
    "air": ["--temperature", "20degC", "--pressure", "1atm", "--wavelength", "633nm"],
}
UNITS = {
    "arm": "m",
    "wavelength": "nm",
    "power": "uW",
    "responsivity": "A/W",
    "transimpedance": "kohm",
    "adc-range": "V",
    "temperature": "degC",
    "pressure": "Pa",
    "low": "V",
    "high": "V",
    "frequency": "Hz",
    "duration": "s",
    "working-phase": "rad",
    "theta": "deg",
    "phi": "deg",
    "psi": "deg",
    "background": "rad",
    "dew-point": "degC",
    "vapour-pressure": "Pa",
}
NUMBERS = ("round-trips", "contrast", "quantum-efficiency", "adc-bits", "humidity", "snr", "mole-fraction", "co2")  # fmt: skip
AIR_ONLY = {"dew-point", "vapour-pressure", "mole-fraction", "co2"}
OUT_OF_RANGE = {
    "arm": "0m", "wavelength": "-633nm", "power": "-1uW", "responsivity": "0A/W", "adc-range": "0V",
    "temperature": "-300degC", "pressure": "-1Pa", "frequency": "-1Hz", "duration": "0s", "background": "-1rad",
    "round-trips": "0", "contrast": "1.5", "quantum-efficiency": "2", "adc-bits": "40", "humidity": "55",
    "snr": "0", "mole-fraction": "1.5", "co2": "450", "dew-point": "25degC", "vapour-pressure": "5kPa",
}  # fmt: skip


def bad_values(option):
    unit = UNITS.get(option, "")
    values = [
        "",
        "abc",
        "nan" + unit,
        "inf" + unit,
        "1,5" + unit,
        "1 2" + unit,
        f"1{unit}+1{unit}",
        "1e999" + unit,
    ]
    values += ["1" + unit + "·s", "1 furlong"]
    if unit:
        values.append("1")
    return [*values, OUT_OF_RANGE[option]] if option in OUT_OF_RANGE else values


CASES = [
    ("air" if option in AIR_ONLY else "expect", option, value)
    for option in (*UNITS, *NUMBERS)
    for value in bad_values(option)
]


def arguments_of(command, option, value):
    good = list(GOOD[command])
    if f"--{option}" in good:
        at = good.index(f"--{option}")
        del good[at : at + 2]
    return [command, *good, f"--{option}={value}"]


@pytest.fixture(autouse=True)
def no_bench(monkeypatch):
    monkeypatch.delenv("MIDFRINGE_BENCH", raising=False)


def test_there_are_enough():
    assert len(CASES) >= 200


@pytest.mark.parametrize(("command", "option", "value"), CASES)
def test_bad_value_is_one_line(capsys, command, option, value):
    assert run(arguments_of(command, option, value)) == 2
    captured = capsys.readouterr()
    assert captured.out == ""
    (line,) = captured.err.splitlines()
    assert line.startswith("midfringe: ")
    assert option.replace("-", " ") in line.replace("-", " ")
    assert "Traceback" not in line


@pytest.mark.slow
@pytest.mark.parametrize(("command", "option", "value"), CASES[:: len(CASES) // 20])
def test_bad_value_of_a_real_process(command, option, value):
    done = subprocess.run(
        [sys.executable, "-m", "metro", *arguments_of(command, option, value)],
        capture_output=True,
        text=True,
        check=False,
    )
    assert (done.returncode, done.stdout) == (2, "")
    assert len(done.stderr.splitlines()) == 1


@pytest.mark.parametrize("name", ["bench.toml", "bench"])
@pytest.mark.parametrize(
    ("command", "option"),
    [("expect", "--out"), ("air", "--out"), ("plan", "--out"), ("expect", "--plot"), ("plan", "--plot")],
)  # fmt: skip
def test_the_bench_file_is_never_replaced(capsys, tmp_path, command, option, name):
    bench = tmp_path / (name if option == "--out" else "bench.svg")
    bench.write_text('[arms]\nlength = "0.5 m"\n')
    arguments = GOOD.get(command, ["--uncertainty", "0.3%"])
    line = [command, "--bench", str(bench), *arguments, option, str(bench), "--overwrite"]
    assert run(line) == 2
    captured = capsys.readouterr()
    assert (captured.out, captured.err.count("\n")) == ("", 1)
    assert f"{bench}" in captured.err
    assert "read for this itself" in captured.err or "written as JSON" in captured.err
    assert bench.read_text() == '[arms]\nlength = "0.5 m"\n'
