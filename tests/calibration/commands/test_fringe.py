"""``midfringe fringe``: the JSON that programs rely on, the exit codes, the real recordings."""

import json

import numpy as np
import pytest
from real_data import real_data

from metro.commandline import main

KEYS = {
    "low", "high", "contrast", "slope", "slope_per_metre", "working_phase", "phase_amplitude",
    "displacement_amplitude", "routes", "agreement", "trustworthy", "reasons",
}  # fmt: skip


def run(capsys, *arguments):
    """Return (exit code, stdout, stderr) of the program."""
    with pytest.raises(SystemExit) as ended:
        main(["fringe", *map(str, arguments)])
    out, err = capsys.readouterr()
    return ended.value.code or 0, out, err


@pytest.fixture
def driven(tmp_path):
    """Return a recording of 0.4 rad at 31.7 Hz about 1.4 rad, extremes 0.2 V and 2.2 V."""
    t = np.arange(8000) / 1000
    volts = 1.2 + np.cos(1.4 + 0.4 * np.cos(2 * np.pi * 31.7 * t))
    volts += 0.005 * np.random.default_rng(0).normal(size=len(t))
    path = tmp_path / "driven.csv"
    rows = "\n".join(f"{a:.6f},{b:.7f}" for a, b in zip(t, volts, strict=True))
    path.write_text("time,photodiode\ns,V\n" + rows + "\n")
    return path


@pytest.fixture
def scan(tmp_path):
    """Return a scan over five fringes with the same extremes."""
    t = np.arange(8000) / 1000
    volts = 1.2 + np.cos(4 * t + 0.3 * np.sin(3 * t))
    volts += 0.005 * np.random.default_rng(1).normal(size=len(t))
    path = tmp_path / "scan.csv"
    rows = "\n".join(f"{a:.6f},{b:.7f}" for a, b in zip(t, volts, strict=True))
    path.write_text("time,photodiode\ns,V\n" + rows + "\n")
    return path


def test_json_with_given_extremes(capsys, driven):
    code, out, _ = run(
        capsys, driven, "--line", "31.7Hz", "--low", "0.2V", "--high", "2.2V",
        "--wavelength", "632.99 nm", "--dark", "0V", "--json",
    )  # fmt: skip
    document = json.loads(out)
    assert code == 0
    assert set(document) >= KEYS
    assert document["trustworthy"] is True
    assert document["reasons"] == []
    assert document["phase_amplitude"][0]["value"] == pytest.approx(0.4, abs=5e-4)
    assert document["phase_amplitude"][0]["unit"] == "rad"
    metres = document["displacement_amplitude"][0]
    assert metres["unit"] == "m"
    assert metres["value"] == pytest.approx(0.4 * 632.99e-9 / (4 * np.pi), rel=2e-3)
    assert document["working_phase"]["value"] == pytest.approx(1.4, abs=2e-3)
    assert document["slope"]["value"] == pytest.approx(-np.sin(1.4), abs=2e-3)
    assert document["slope"]["unit"] == "V/rad"
    assert document["contrast"]["value"] == pytest.approx(1 / 1.2, rel=1e-9)
    assert document["slope_per_metre"]["unit"] == "V/m"
    assert {route["route"] for route in document["routes"]} >= {"driven fringe", "mid-fringe slope"}
    assert document["agreement"]["agree"] is True


def test_without_wavelength_and_dark_metres_and_contrast_are_null(capsys, driven):
    code, out, _ = run(
        capsys, driven, "--line", "31.7Hz", "--low", "0.2V", "--high", "2.2V", "--json"
    )
    document = json.loads(out)
    assert code == 0
    assert document["displacement_amplitude"] is None
    assert document["slope_per_metre"] is None
    assert document["contrast"] is None
    assert all(route["displacement_amplitude"] is None for route in document["routes"])


def test_extremes_from_another_recording(capsys, driven, scan):
    code, out, _ = run(capsys, driven, "--line", "31.7Hz", "--extremes", scan, "--json")
    document = json.loads(out)
    assert code == 0
    assert document["phase_amplitude"][0]["value"] == pytest.approx(0.4, abs=2e-3)
    assert document["low"]["value"] == pytest.approx(0.2, abs=3e-3)
    assert document["high"]["u"] > 0


def test_dark_from_a_recording(capsys, driven, tmp_path):
    dark = tmp_path / "dark.csv"
    dark.write_text(
        "time,photodiode\ns,V\n" + "".join(f"{k / 1000},0.{k % 2}\n" for k in range(640))
    )
    code, out, _ = run(
        capsys,
        driven,
        "--line",
        "31.7Hz",
        "--low",
        "0.2V",
        "--high",
        "2.2V",
        "--dark",
        dark,
        "--json",
    )
    assert code == 0
    assert json.loads(out)["contrast"]["value"] == pytest.approx(2 / (2.4 - 0.1), rel=1e-6)


def test_counts(capsys, tmp_path):
    t = np.arange(6000) / 1000
    counts = np.round(2048 + 1500 * np.cos(1.4 + 0.4 * np.cos(2 * np.pi * 31.7 * t)))
    path = tmp_path / "counts.csv"
    path.write_text("\n".join(f"{a:.6f},{b:.0f}" for a, b in zip(t, counts, strict=True)) + "\n")
    code, out, err = run(
        capsys, path, "--channel", "2", "--line", "31.7Hz", "--low", "548", "--high", "3548 counts",
        "--json",
    )  # fmt: skip
    assert code == 0, err
    assert json.loads(out)["phase_amplitude"][0]["value"] == pytest.approx(0.4, abs=1e-3)


def test_a_depth_that_is_not_determined_ends_with_1(capsys, driven):
    code, out, err = run(capsys, driven, "--line", "31.7Hz", "--json")
    document = json.loads(out)
    assert code == 1
    assert document["trustworthy"] is False
    assert "depth not determined by this record" in document["reasons"][0]
    assert "depth not determined by this record" in err


def test_for_people(capsys, driven):
    code, out, _ = run(
        capsys, driven, "--line", "31.7Hz", "--low", "0.2V", "--high", "2.2V",
        "--wavelength", "632.99 nm",
    )  # fmt: skip
    assert code == 0
    assert "31.7 Hz" in out
    assert "(95 %)" in out
    assert "no reason for distrust found" in out
    assert "the arms are taken to be in vacuum" in out


@pytest.mark.parametrize(
    ("arguments", "words"),
    [
        (["--line", "31.7"], "--line must have a unit"),
        (["--line", "600Hz"], "below half the rate"),
        (["--line", "31.7Hz", "--low", "0.2V"], "low and high must be given together"),
        (["--line", "31.7Hz", "--low", "3V", "--high", "2V"], "high must be above low"),
        (["--line", "31.7Hz", "--low", "3", "--high", "4"], "--low must have a unit"),
        (["--line", "31.7Hz", "--low", "0.2V", "--high", "2.2V", "--extremes", "x.csv"], "one or the other"),
        (["--line", "31.7Hz", "--extremes", "no-such-file.csv"], "no-such-file.csv"),
    ],
)  # fmt: skip
def test_wrong_input_ends_with_2_and_one_line(capsys, driven, arguments, words):
    code, out, err = run(capsys, driven, *arguments)
    assert code == 2
    assert out == ""
    assert len(err.strip().splitlines()) == 1
    assert words in err


def test_out_is_written_and_not_overwritten(capsys, driven, tmp_path):
    target = tmp_path / "fringe.json"
    given = (driven, "--line", "31.7Hz", "--low", "0.2V", "--high", "2.2V", "--out", target)
    assert run(capsys, *given)[0] == 0
    assert json.loads(target.read_text("utf-8"))["trustworthy"] is True
    code, _, err = run(capsys, *given)
    assert code == 2
    assert "exists" in err
    assert run(capsys, *given, "--overwrite")[0] == 0


def fibre(name):
    return real_data(f"fiber-modulator-calline/fom-pa/{name}")


@pytest.mark.parametrize(
    ("low", "high", "least", "most"),
    [("0.5V", "10.2V", 0.366, 0.373), ("0.44V", "9.69V", 0.384, 0.391)],
)
def test_fibre_modulator_at_1_khz(capsys, low, high, least, most):
    code, out, _ = run(
        capsys, fibre("fom-pa-waveform_1kHz.csv"), "--channel", "3", "--line", "1kHz",
        "--low", low, "--high", high, "--json",
    )  # fmt: skip
    assert code == 0
    assert least < json.loads(out)["phase_amplitude"][0]["value"] < most


@pytest.mark.parametrize(
    "extremes", [(), ("--low", "0.5V", "--high", "10.2V"), ("--low", "0.44V", "--high", "9.69V")]
)
def test_fibre_modulator_at_a_fringe_top(capsys, extremes):
    code, _, err = run(
        capsys, fibre("fom-pa-control-actuation.csv"), "--channel", "2", "--line", "30Hz",
        "--to", "0.5s", *extremes,
    )  # fmt: skip
    assert code == 1
    assert "the working point sits at a fringe top" in err


@pytest.mark.parametrize(
    ("extra", "least", "most"),
    [
        ((), 0.555, 0.590),
        (("--extremes", "itself"), 0.555, 0.590),
        (("--low", "0.5V", "--high", "10.2V"), 0.536, 0.549),
    ],
)
def test_fibre_modulator_under_control(capsys, extra, least, most):
    path = fibre("fom-pa-control-actuation.csv")
    extra = [path if part == "itself" else part for part in extra]
    code, out, _ = run(
        capsys, path, "--channel", "2", "--line", "30Hz", "--from", "2.5s", *extra, "--json"
    )
    assert code == 0
    assert least < json.loads(out)["phase_amplitude"][0]["value"] < most
