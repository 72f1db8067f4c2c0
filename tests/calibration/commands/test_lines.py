"""``midfringe lines``: the JSON that programs rely on, the exit codes, the real recordings."""

import json

import numpy as np
import pytest
from real_data import real_data

from metro.commandline import run

FOLDER = "fiber-modulator-calline"
LINE_KEYS = {
    "frequency", "amplitude", "phase", "noise_density", "snr", "drive", "ratio", "trustworthy",
    "reasons",
}  # fmt: skip


@pytest.fixture(autouse=True)
def no_bench(monkeypatch):
    monkeypatch.delenv("MIDFRINGE_BENCH", raising=False)


def lines(capsys, *arguments):
    """Return (exit code, stdout, stderr) of the program."""
    code = run(["lines", *map(str, arguments)])
    out, err = capsys.readouterr()
    return code, out, err


@pytest.fixture
def recording(tmp_path):
    """Return a CSV of a line at 31.7 Hz, 0.3 V and 0.5 rad, drive 2 V and −0.2 rad, 4 s at 1 kHz."""
    t = np.arange(4000) / 1000
    rng = np.random.default_rng(1)
    volts = 1.2 + 0.3 * np.cos(2 * np.pi * 31.7 * t + 0.5) + 0.01 * rng.standard_normal(len(t))
    drive = 2 * np.cos(2 * np.pi * 31.7 * t - 0.2) + 0.001 * rng.standard_normal(len(t))
    rows = [f"{a:.3f},{b:.6f},{c:.6f}" for a, b, c in zip(t, volts, drive, strict=True)]
    path = tmp_path / "scope.csv"
    path.write_text("\n".join(["time,photodiode,drive", "s,V,V", *rows]) + "\n")
    return path


def test_json_has_what_programs_rely_on(capsys, recording):
    code, out, err = lines(capsys, recording, "--line", "31.7Hz", "--json")
    document = json.loads(out)
    assert (code, err) == (0, "")
    assert set(document) >= {"lines", "clock_offset", "used_fraction", "duration"}
    (line,) = document["lines"]
    assert set(line) == LINE_KEYS
    assert line["frequency"] == {"value": 31.7, "unit": "Hz", "u": 0.0}
    # u = 0.01·√(2/4000) = 0.22 mV of 0.3 V: five of it.
    assert line["amplitude"]["value"] == pytest.approx(0.3, abs=1.2e-3)
    assert line["amplitude"]["u"] == pytest.approx(2.2e-4, rel=0.3)
    assert line["phase"]["value"] == pytest.approx(0.5, abs=4e-3)
    assert line["noise_density"]["unit"] == "V/Hz**0.5"
    assert line["snr"]["unit"] == "1"
    assert line["drive"]["amplitude"]["value"] == pytest.approx(2.0, abs=1e-3)
    assert line["ratio"]["magnitude"]["unit"] == "1"
    assert line["ratio"]["magnitude"]["value"] == pytest.approx(0.15, abs=6e-4)
    assert line["ratio"]["phase"]["value"] == pytest.approx(0.7, abs=4e-3)
    assert line["trustworthy"] is True
    assert line["reasons"] == []
    assert document["used_fraction"] == 1.0
    assert document["duration"]["value"] == pytest.approx(4.0)
    assert document["duration"]["unit"] == "s"


def test_for_people(capsys, recording):
    code, out, err = lines(capsys, recording, "--line", "31.7Hz", "--free")
    assert (code, err) == (0, "")
    assert "no reason for distrust found" in out
    assert "U = " in out
    assert "t = 0 at the first sample of the recording" in out


def test_a_stretch_keeps_the_phase_of_the_whole(capsys, recording):
    arguments = (recording, "--line", "31.7Hz", "--json")
    _, whole, _ = lines(capsys, *arguments)
    _, part, _ = lines(capsys, *arguments, "--from", "1.234s", "--to", "3.5s")
    phases = [json.loads(text)["lines"][0]["phase"]["value"] for text in (whole, part)]
    assert phases[0] == pytest.approx(phases[1], abs=5e-3)
    assert json.loads(part)["duration"]["value"] == pytest.approx(2.266, abs=2e-3)


def test_lines_of_the_bench_and_a_file_written_whole(capsys, recording, tmp_path):
    bench = tmp_path / "bench.toml"
    bench.write_text('[[line]]\nfrequency = "31.7 Hz"\ndrive = "2 V"\n')
    result = tmp_path / "lines.json"
    code, _, _ = lines(capsys, recording, "--bench", bench, "--out", result)
    assert code == 0
    assert len(json.loads(result.read_text())["lines"]) == 1
    code, out, err = lines(capsys, recording, "--bench", bench, "--out", result)
    assert (code, out) == (2, "")
    assert err.count("\n") == 1


def test_missing_samples_are_left_out_and_counted(capsys, recording, tmp_path):
    rows = recording.read_text().splitlines()
    holes = tmp_path / "holes.csv"
    holes.write_text("\n".join(rows[:1000] + rows[1400:]) + "\n")
    code, out, _ = lines(capsys, holes, "--line", "31.7Hz", "--json")
    document = json.loads(out)
    assert code == 0
    assert document["used_fraction"] == pytest.approx(0.9, abs=1e-9)
    assert document["lines"][0]["amplitude"]["value"] == pytest.approx(0.3, abs=1.3e-3)


def test_a_line_that_is_not_there_ends_with_1_and_the_reason(capsys, recording):
    code, out, err = lines(capsys, recording, "--line", "31.7Hz", "--line", "211.3Hz")
    assert code == 1
    assert "no reason for distrust found" in out
    assert "not to be trusted: 211.3 Hz: too weak" in err


@pytest.mark.parametrize(
    ("arguments", "message"),
    [
        ([], "--line is needed"),
        (["--line", "600Hz"], "below half the sampling rate, 500 Hz, got 600 Hz"),
        (["--line", "31.7"], "31.7"),
        (["--line", "31,7Hz"], "decimal point"),
        (["--line", "3m"], "3m"),
        (["--line", "31.7Hz", "--channel", "none"], "none"),
    ],
)
def test_wrong_input_is_refused_in_one_line(capsys, recording, arguments, message):
    code, out, err = lines(capsys, recording, *arguments)
    assert (code, out) == (2, "")
    assert err.count("\n") == 1
    assert message in err


def test_real_line_at_1_khz(capsys):
    # Figures: README of the data.
    path = real_data(f"{FOLDER}/fom-pa/fom-pa-waveform_1kHz.csv")
    code, out, _ = lines(capsys, path, "--channel", 3, "--drive", 2, "--line", "1kHz", "--json")
    (line,) = json.loads(out)["lines"]
    assert code == 0
    assert line["drive"]["amplitude"]["value"] == pytest.approx(0.1002, rel=5e-3)
    assert line["amplitude"]["value"] == pytest.approx(1.757, rel=5e-3)


@pytest.mark.parametrize(
    ("name", "line", "amplitude", "frequency"),
    [("30Hz", "30Hz", 4.914, 29.9994), ("150Hz", "150Hz", 4.911, 150.001)],
)
def test_real_drives_with_free_frequency(capsys, name, line, amplitude, frequency):
    path = real_data(f"{FOLDER}/fom-mc/fom-mc-waveform-{name}.csv")
    code, out, _ = lines(capsys, path, "--channel", 4, "--line", line, "--free", "--json")
    (found,) = json.loads(out)["lines"]
    assert code == 0
    assert found["amplitude"]["value"] == pytest.approx(amplitude, rel=3e-3)
    assert found["frequency"]["value"] == pytest.approx(frequency, abs=1e-3)


def test_a_real_working_point_at_a_fringe_top_ends_with_1(capsys):
    path = real_data(f"{FOLDER}/fom-pa/fom-pa-control-actuation.csv")
    code, out, err = lines(capsys, path, "--channel", 2, "--line", "30Hz", "--to", "0.5s", "--json")
    (line,) = json.loads(out)["lines"]
    assert code == 1
    assert line["trustworthy"] is False
    assert "at a fringe top or bottom" in line["reasons"][0]
    assert "not to be trusted: 30 Hz: the response is" in err


def test_gaps_harmonics_and_the_course_are_shown(capsys, recording, tmp_path):
    pytest.importorskip("matplotlib")
    rows = recording.read_text().splitlines()
    holes, plot = tmp_path / "holes.csv", tmp_path / "lines.png"
    holes.write_text("\n".join(rows[:1000] + rows[1400:2000] + rows[2003:]) + "\n")
    arguments = [
        holes,
        "--line",
        "31.7Hz",
        "--line",
        "87.1Hz",
        "--harmonics",
        3,
        "--intermodulation",
    ]
    code, out, err = lines(capsys, *arguments, "--over-time", "--plot", plot)
    assert code == 1  # there is no line at 87.1 Hz
    assert "2 gaps, 403 samples" in out
    assert "2 × 31.7 Hz" in out
    assert "87.1 Hz − 31.7 Hz" in out
    assert "31.7 Hz, time" in out
    assert "ppm/s" in out
    assert "filter" not in err
    assert plot.read_bytes().startswith(b"\x89PNG")
    _, out, _ = lines(capsys, *arguments, "--over-time", "--json")
    document = json.loads(out)
    assert document["gaps"] == {"number": 2, "samples": 403}
    assert len(document["products"]) == 6
    first = document["products"][0]
    assert (first["of"], first["orders"], first["seen"]) == ([31.7], [2], False)
    assert set(first["relative"]) >= {"value", "unit", "u"}
    course = document["lines"][0]["course"]
    assert len(course["time"]["value"]) == len(course["phase"]["u"])
    assert document["clock_drift"]["unit"] == "1/s"


def test_the_filter_is_told_where_it_is_asked_for(capsys, tmp_path):
    t = np.arange(8000) / 1000
    walk = np.cumsum(0.01 * np.random.default_rng(1).standard_normal(len(t)))
    volts = np.cos(2 * np.pi * 31.7 * t) + walk
    path = tmp_path / "walk.csv"
    path.write_text(
        "\n".join(["time,pd", "s,V", *(f"{a:.3f},{b:.6f}" for a, b in zip(t, volts, strict=True))])
        + "\n"
    )
    code, _, err = lines(capsys, path, "--line", "31.7Hz")
    assert (code, err) == (0, "")
    _, _, err = lines(capsys, path, "--line", "31.7Hz", "--verbose")
    assert "the noise is not white" in err
