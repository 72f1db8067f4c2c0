"""Calibrations: what a session needs, what it refuses, what it says about what is missing."""

import json
import re
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
        ({"readout": {}}, "$.readout must have 'slope', got none"),
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


@pytest.mark.slow
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
        stripped[role] = []
        for number, file in enumerate(files[role]):  # the first line again has the others undriven
            out = tmp_path / f"{role}-{number}.npz"
            assert run(["export", file, "--channel", "photodiode", "--out", str(out)]) == 0
            stripped[role].append(str(out))
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
        scan=files["scan"][1:],
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
        ["convert", rising, "--calibration", str(cal), "--out", str(cal), "--overwrite"],
        ["lines", rising, "--line", "87.1Hz", "--out", rising, "--overwrite"],
        ["lines", rising, "--line", "87.1Hz", "--out", str(tmp_path / "x.mfr")],
        ["fringe", rising, "--line", "87.1Hz", "--out", rising, "--overwrite"],
        ["emit", "c", "--calibration", str(cal), "--out", str(cal), "--overwrite"],
        [
            *("calibrate", "--bench", str(BENCH_FILE), "--scan", rising, "--lines-rising", rising),
            *("--out", rising, "--overwrite"),
        ],
        ["rehearse", "--seed", "-1"],
        ["rehearse", "--trials", "0"],
    ):
        assert run(arguments) == 2, arguments
        said = capsys.readouterr()
        assert said.out == "", arguments
        assert said.err.count("\n") == 1, said.err
    assert load(cal).to_dict() == calibration.to_dict()
    assert [path.name for path in tmp_path.iterdir()] == ["cal.json"]


@pytest.mark.parametrize(
    "drive",
    [
        'point = "amplifier input"\namplifier_gain = { value = 20, u = 0.02 }\nreading = "rms"',
        'point = "generator setting"\nassumed_load = "50 ohm"\nreading = "peak-to-peak"',
    ],
)
def test_a_drive_read_before_the_terminals(tmp_path, drive):
    text = BENCH_FILE.read_text(encoding="utf-8")
    text = text.replace('point = "actuator terminals"\nreading = "peak"', drive)
    path = tmp_path / "bench.toml"
    path.write_text(text, encoding="utf-8")
    bench = load_bench(path)
    bench = replace(bench, lines=tuple(replace(k, drive_v=0.16 / 10) for k in bench.lines))
    simulated, calibration = calibrated(bench, 8, tmp_path)
    for entry in calibration.actuator:
        true = abs(simulated.truth.actuator(float(entry.frequency.magnitude)))
        assert abs(entry.magnitude.magnitude - true) < 4.5 * entry.magnitude.u_magnitude


def exported(file, out, change=None):
    """Write a recording as CSV, its values and header changed."""
    assert run(["export", file, "--out", str(out)]) == 0
    if change is not None:
        out.write_text(change(out.read_text(encoding="utf-8")), encoding="utf-8")
    return str(out)


def test_counts_are_converted_or_refused(session, tmp_path):
    """The same recordings as bare ADC counts: converted with adc.bits and range, else refused."""
    _, files, calibration = session

    def in_counts(name):
        out = tmp_path / f"{name}.npy"
        recording = open_recording(files[name][0])
        step = 10.0 / 2**16
        traces = [recording.trace(c).values / step for c in ("photodiode", "drive")]
        rows = zip(np.arange(traces[0].size) / recording.rate_hz, *traces, strict=True)
        text = "\n".join(f"{t:.6f},{p:.0f},{d:.0f}" for t, p, d in rows)
        out = tmp_path / f"{name}.csv"
        out.write_text(f"time_s,photodiode,drive\n{text}\n", encoding="utf-8")
        return [str(out)]

    counts = {name: in_counts(name) for name in ("scan", "lines_rising", "lines_falling")}
    found = calibrate(built_in_bench(), **counts)
    for entry, full in zip(found.actuator, calibration.actuator, strict=True):
        assert entry.magnitude.magnitude == pytest.approx(full.magnitude.magnitude, rel=0.01)
    bare = tmp_path / "bench.toml"
    text = BENCH_FILE.read_text(encoding="utf-8")
    bare.write_text(without(text, "bits", "quadratic", "cubic"), encoding="utf-8")
    with pytest.raises(CalibrationError, match="has no unit; as ADC counts it needs"):
        calibrate(load_bench(bare), **counts)


def test_drives_recorded_only_in_part_are_refused(session, tmp_path):
    _, files, _ = session
    out = tmp_path / "bare.npz"
    falling = files["lines_falling"][0]
    assert run(["export", falling, "--channel", "photodiode", "--out", str(out)]) == 0
    with pytest.raises(CalibrationError, match="must have a drive channel or none"):
        calibrate(
            built_in_bench(),
            scan=files["scan"],
            lines_rising=files["lines_rising"],
            lines_falling=[str(out)],
        )


def test_a_known_scale_error_is_corrected(session):
    """adc.reference = 1 %: the drive's volts and the readout's slope change by that much."""
    _, files, calibration = session
    bench = built_in_bench()
    bench = bench.replace({"adc.reference": Measured.of(0.01, "1", 0.0015)})
    moved = calibrate(bench, **files)
    for entry, plain in zip(moved.actuator, calibration.actuator, strict=True):
        ratio = entry.magnitude.magnitude / plain.magnitude.magnitude
        assert ratio == pytest.approx(1.01, rel=1e-9)
    slope = moved.readout_slope.magnitude / calibration.readout_slope.magnitude
    assert slope == pytest.approx(1 / 1.01, rel=1e-9)


@pytest.mark.parametrize(
    "key", ["adc.quadratic", "adc.cubic", "drive.pickup", "actuator.tilt", "fringe.drift"]
)
def test_a_known_error_that_is_not_corrected_is_refused(session, key):
    bench = built_in_bench()
    bench = bench.replace({key: Measured.of(0.01, bench.get(key).unit, 1e-4)})
    with pytest.raises(
        CalibrationError, match=re.escape(key) + " must have the value 0 with its u"
    ):
        calibrate(bench, **session[1])


def test_a_repeat_that_differs_is_not_trusted(session, tmp_path):
    """The last recording on a slope with the photodiode's light 3 % up: the line differs from the first."""
    _, files, _ = session
    source = open_recording(files["lines_rising"][0])
    volts, drive = (source.trace(name).values for name in ("photodiode", "drive"))
    other = tmp_path / "other.csv"
    rows = zip(np.arange(volts.size) / source.rate_hz, volts, 0.95 * drive, strict=True)
    text = "\n".join(f"{t:.6f},{v:.7f},{d:.7f}" for t, v, d in rows)
    other.write_text(f"time_s,photodiode [V],drive [V]\n{text}\n", encoding="utf-8")
    calibration = calibrate(
        built_in_bench(),
        scan=files["scan"],
        lines_rising=[files["lines_rising"][0], str(other)],
        lines_falling=files["lines_falling"],
    )
    assert any("they differ" in reason for reason in calibration.reasons)


@pytest.mark.slow
def test_recordings_in_the_wrong_role_are_not_trusted(session):
    _, files, _ = session
    second, first = {"scan": files["scan"][1:]}, files["scan"][:1]
    lit = calibrate(built_in_bench(), **(files | second | {"dark": first}))
    assert any("lies above the fringe's low" in reason for reason in lit.reasons)
    rising = {"pickup": files["lines_rising"], "lines_rising": ()}
    shone = calibrate(built_in_bench(), **(files | rising))
    assert any("the beam was not blocked" in reason for reason in shone.reasons)
    both = calibrate(built_in_bench(), **(files | second | {"blocked_x": first}))
    assert any("shows a fringe" in reason for reason in both.reasons)


def test_the_rounded_wavelength_in_air_draws_its_caution(session):
    bench = built_in_bench()
    bench = bench.replace({"laser.wavelength": Measured.of(632.8e-9, "m", 1e-12)})
    calibration = calibrate(bench, **session[1])
    assert any("632.8 nm is the rounded value in air" in text for text in calibration.cautions)
