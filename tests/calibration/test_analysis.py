"""Calibrations: what a session needs, what it refuses, what it says about what is missing."""

import json
from dataclasses import replace

import numpy as np
import pytest
from sessions import BENCH_FILE, built_in_bench, calibrated, play

from calibration.analysis import calibrate
from calibration.convert import ConvertedRecording
from calibration.errors import CalibrationError
from calibration.record import CalibrationFileError, load
from firmware_bridge.opening import open_recording
from metro.bench import Bench, load_bench
from metro.commandline import run
from metro.measured import Measured


@pytest.fixture(scope="module")
def session(tmp_path_factory):
    """One session with its bench, its files and its calibration."""
    folder = tmp_path_factory.mktemp("session")
    simulated, files = play(built_in_bench(), 6, folder)
    return simulated, files, calibrate(built_in_bench(), **files)


def test_every_line_lies_near_its_truth(session):
    simulated, _, calibration = session
    for entry in calibration.actuator:
        true = simulated.truth.actuator(float(entry.frequency.magnitude))
        # 4.5 standard uncertainties: one seed, no chance of 1e-5 may fail it
        assert abs(entry.magnitude.magnitude - abs(true)) < 4.5 * entry.magnitude.u_magnitude
        assert abs(entry.phase.magnitude - np.angle(true)) < 4.5 * entry.phase.u_magnitude
    assert calibration.is_trustworthy


def test_budget_names_what_the_session_rests_on(session):
    _, _, calibration = session
    names = " ".join(c.name for c in calibration.actuator[0].budget.contributions)
    for wanted in (
        "wavelength",
        "refractive index",
        "fringe extremes",
        "line fit",
        "drive reading",
        "ADC reference",
        "ADC curvature",
        "readout response",
        "pick-up",
    ):
        assert wanted in names


def test_pickup_is_measured_on_the_two_slopes(session):
    simulated, _, calibration = session
    truth = simulated.truth
    for entry in calibration.actuator:
        frequency_hz = float(entry.frequency.magnitude)
        wires = truth.pickup_v_per_v * frequency_hz / 100.0
        tilt = truth.tilt_per_v / 2 * truth.swing_v / truth.contrast
        true = abs(wires + tilt) * truth.divider
        assert abs(entry.pickup.magnitude - true) < 5 * entry.pickup.u_magnitude


def test_file_comes_back_as_it_was(session, tmp_path):
    _, _, calibration = session
    path = tmp_path / "cal.json"
    path.write_text(json.dumps(calibration.to_dict()))
    assert load(path).to_dict() == calibration.to_dict()


@pytest.mark.parametrize(
    ("change", "message"),
    [
        ({"format": "other"}, "this is no calibration: its format is not 'midfringe calibration'"),
        ({"version": 2}, "the calibration has version 2; this program reads up to 1"),
        ({"version": "x"}, "version must be a whole number from 1, got 'x'"),
        ({"readout": {}}, "the calibration has no 'slope'"),
    ],
)
def test_file_that_does_not_fit_is_refused(session, tmp_path, change, message):
    path = tmp_path / "cal.json"
    path.write_text(json.dumps(session[2].to_dict() | change))
    with pytest.raises(CalibrationFileError) as error:
        load(path)
    assert str(error.value) == f"{path}: {message}"


def test_one_slope_alone_says_so_and_budgets_the_pickup(tmp_path):
    keep = {"05-scan", "06-lines-rising"}
    simulated, calibration = calibrated(
        built_in_bench(), 6, tmp_path, keep=lambda step: step.name in keep
    )
    assert any("falling slope" in caution for caution in calibration.cautions)
    assert any("dark level not measured" in caution for caution in calibration.cautions)
    assert calibration.contrast is None
    entry = calibration.actuator[3]
    assert any("not measured" in c.name for c in entry.budget.contributions)
    true = abs(simulated.truth.actuator(233.9))
    assert abs(entry.magnitude.magnitude - true) < 4.5 * entry.magnitude.u_magnitude


def test_one_slope_with_pickup_measured_is_corrected(tmp_path):
    """A pick-up of 3 % of the line: with one slope and the beam-blocked records it is taken off."""
    bench = built_in_bench().replace({"drive.pickup": Measured.of(0.0, "1", 0.02)})
    keep = {"02-pickup", "03-blocked-x", "04-blocked-y", "05-scan", "06-lines-rising"}
    for seed in range(1, 5):
        simulated, calibration = calibrated(
            bench, seed, tmp_path, keep=lambda step: step.name in keep
        )
        for entry in calibration.actuator:
            true = abs(simulated.truth.actuator(float(entry.frequency.magnitude)))
            error = abs(entry.magnitude.magnitude - true)
            assert error < 4.5 * entry.magnitude.u_magnitude
            assert entry.magnitude.relative_u < 0.01


def test_swapped_slopes_contradict_the_declared_polarity(session):
    _, files, _ = session
    swapped = {
        "scan": files["scan"],
        "lines_rising": files["lines_falling"],
        "lines_falling": files["lines_rising"],
    }
    calibration = calibrate(built_in_bench(), **swapped)
    assert not calibration.is_trustworthy
    assert any("sign contradicts the declared polarity" in r for r in calibration.all_reasons)


def test_without_a_drive_channel_the_stated_drive_is_taken(session, tmp_path):
    """The lines recordings exported without their drive: magnitudes stay, phases are unknown."""
    simulated, files, calibration = session
    bench, stripped = built_in_bench(), {"scan": files["scan"]}
    for role in ("lines_rising", "lines_falling"):
        out = tmp_path / f"{role}.npz"
        assert run(["export", files[role][0], "--channel", "photodiode", "--out", str(out)]) == 0
        stripped[role] = [str(out)]
    bare = calibrate(bench, **stripped)
    for entry, full in zip(bare.actuator, calibration.actuator, strict=True):
        assert entry.phase is None
        true = abs(simulated.truth.actuator(float(entry.frequency.magnitude)))
        assert entry.magnitude.magnitude == pytest.approx(true, rel=0.01)
        assert entry.magnitude.magnitude == pytest.approx(full.magnitude.magnitude, rel=0.01)


def without(text, *lines):
    return "\n".join(line for line in text.splitlines() if not line.startswith(lines))


@pytest.mark.parametrize(
    ("drop", "message"),
    [
        (("wavelength",), "laser.wavelength is the ruler and must be given"),
        (("source",), "laser.source must say where the wavelength comes from"),
        (
            ("temperature", "pressure", "humidity", "co2"),
            "[air] must hold temperature and pressure",
        ),
    ],
)
def test_bench_without_the_ruler_is_refused(session, tmp_path, drop, message):
    path = tmp_path / "bench.toml"
    path.write_text(without(BENCH_FILE.read_text(encoding="utf-8"), *drop), encoding="utf-8")
    with pytest.raises(CalibrationError) as error:
        calibrate(load_bench(path), **session[1])
    assert message in str(error.value)


def test_session_without_lines_or_scan_is_refused(session):
    _, files, _ = session
    with pytest.raises(CalibrationError, match="at least one recording of lines on a slope"):
        calibrate(built_in_bench(), scan=files["scan"])
    with pytest.raises(CalibrationError, match="needs the fringe's extremes"):
        calibrate(built_in_bench(), lines_rising=files["lines_rising"])
    empty = replace(built_in_bench(), lines=())
    with pytest.raises(CalibrationError, match=r"at least one \[\[line\]\]"):
        calibrate(empty, **files)
    with pytest.raises(CalibrationError, match=r"laser\.wavelength is the ruler"):
        calibrate(Bench(), **files)


def test_a_wandering_working_point_is_distrusted(session):
    """A scan given as a lines recording: it leaves the slope and crosses fringes."""
    _, files, _ = session
    calibration = calibrate(
        built_in_bench(),
        scan=files["scan"],
        lines_falling=[*files["lines_falling"], files["scan"][0]],
    )
    assert not calibration.is_trustworthy
    assert any("wandered off mid-fringe" in reason for reason in calibration.reasons)


def test_conversion_is_the_fringe_law_backwards(session):
    _, files, calibration = session
    source = open_recording(files["lines_rising"][0])
    extremes = calibration.extremes
    volts = source.trace("photodiode").values
    phase = ConvertedRecording(source, "photodiode", calibration, "phase").trace("phase").values
    back = extremes.mid_v + extremes.swing_v * np.cos(phase)
    np.testing.assert_allclose(back, volts, rtol=0, atol=1e-12)
    metres = ConvertedRecording(source, "photodiode", calibration).trace("displacement").values
    ruler = 632.9908e-9 / (4 * np.pi * float(calibration.chain["index"].magnitude))
    np.testing.assert_allclose(metres, phase * ruler, rtol=1e-12)
    strain = ConvertedRecording(source, "photodiode", calibration, "strain").trace("strain").values
    np.testing.assert_allclose(strain, metres / 0.42, rtol=1e-12)


def test_conversion_on_the_other_slope_moves_the_other_way(session):
    _, files, calibration = session
    source = open_recording(files["lines_rising"][0])
    rising = ConvertedRecording(source, "photodiode", calibration).trace("displacement").values
    other = (
        ConvertedRecording(source, "photodiode", calibration, "displacement", "falling")
        .trace("displacement")
        .values
    )
    np.testing.assert_allclose(other, -rising, rtol=1e-12)


def test_convert_command_keeps_gaps(session, tmp_path, capsys):
    _, files, calibration = session
    cal, gappy, out = (tmp_path / name for name in ("cal.json", "gappy.csv", "moved.npz"))
    cal.write_text(json.dumps(calibration.to_dict()))
    trace = open_recording(files["lines_rising"][0]).trace("photodiode")
    values = trace.values[:4000].copy()
    values[1000:1100] = np.nan
    rows = "\n".join(f"{k / 4000:.6f},{v:.9g}" for k, v in enumerate(values))
    gappy.write_text(f"time_s,photodiode [V]\n{rows}\n")
    code = run(["convert", str(gappy), "--calibration", str(cal), "--out", str(out), "--json"])
    document = json.loads(capsys.readouterr().out)
    assert code == 0
    assert set(document) >= {"file", "samples", "quantity", "uncertainty", "used_fraction"}
    assert document["samples"] == 4000
    assert document["used_fraction"] == pytest.approx(0.975)
    assert 0 < document["uncertainty"]["systematic"]["value"] < 0.005
    moved = np.load(out)["displacement"]
    assert np.isnan(moved[1000:1100]).all()
    assert np.isfinite(np.delete(moved, slice(1000, 1100))).all()


def test_commands_refuse_in_one_line(session, tmp_path, capsys):
    _, files, calibration = session
    cal = tmp_path / "cal.json"
    cal.write_text(json.dumps(calibration.to_dict()))
    rising = files["lines_rising"][0]
    for arguments in (
        ["calibrate"],
        ["calibrate", "--bench", str(BENCH_FILE), "--scan", rising],
        ["calibrate", "--bench", str(BENCH_FILE), "--lines-rising", str(tmp_path / "none.mfr")],
        ["convert", rising, "--calibration", str(cal)],
        ["convert", rising, "--calibration", rising, "--out", str(tmp_path / "x.csv")],
        ["convert", rising, "--calibration", str(cal), "--out", str(tmp_path / "x.doc")],
        ["convert", rising, "--calibration", str(cal), "--out", str(cal)],
        ["rehearse", "--seed", "-1"],
        ["rehearse", "--trials", "0"],
    ):
        assert run(arguments) == 2, arguments
        said = capsys.readouterr()
        assert said.out == "", arguments
        assert said.err.count("\n") == 1, said.err
    assert load(cal).to_dict() == calibration.to_dict()
