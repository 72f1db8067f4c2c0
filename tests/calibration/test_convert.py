"""Conversions: block by block as in one piece, filters against the formula, gaps, memory."""

import json
import subprocess
import sys
from dataclasses import replace
from pathlib import Path

import numpy as np
import pytest
from sessions import built_in_bench, play

from calibration.analysis import calibrate
from calibration.conversion_filter import actuator_stage, loop_stage, readout_stage
from calibration.convert import ConvertedRecording
from calibration.convert_plot import course_of
from calibration.driven_displacement import DrivenDisplacement
from calibration.errors import CalibrationError
from calibration.open_loop import load_open_loop
from calibration.record import load
from firmware_bridge.opening import open_recording
from firmware_bridge.timing import Timing
from metro.commandline import run
from metro.measured import Measured

SAMPLE = Path(__file__).parent / "samples" / "calibration-1.json"


@pytest.fixture(scope="module")
def session(tmp_path_factory):
    folder = tmp_path_factory.mktemp("session")
    simulated, files = play(built_in_bench(), 6, folder, lines_s=6.0)
    calibration = calibrate(built_in_bench(), **files)
    path = folder / "cal.json"
    path.write_text(json.dumps(calibration.to_dict()), encoding="utf-8")
    return simulated, files, calibration, str(path)


def loop_table(path):
    at_hz = np.geomspace(10.0, 1900.0, 300)
    gain = 40.0 / (1j * at_hz)
    rows = [
        f"{f:.9f},{abs(g):.12f},{np.degrees(np.angle(g)):.9f},{0.01 * abs(g):.12f}"
        for f, g in zip(at_hz, gain, strict=True)
    ]
    header = "frequency [Hz],magnitude,phase [deg],u_magnitude"
    path.write_text("\n".join([header, *rows]) + "\n", encoding="utf-8")
    return str(path)


def line(values, at_hz, rate_hz):
    """A line's phasor by plain projection over whole seconds, numpy alone."""
    good = np.flatnonzero(np.isfinite(values))
    time_s = good / rate_hz
    window = np.hanning(good.size)
    turned = values[good] * np.exp(-2j * np.pi * at_hz * time_s) * window
    return 2 * turned.sum() / window.sum()


def test_blocks_make_what_the_whole_makes(session):
    _, files, calibration, _ = session
    source = open_recording(files["lines_rising"][0])
    stages = [readout_stage(calibration, source.rate_hz)]
    moved = ConvertedRecording(source, "photodiode", calibration, stages=stages)
    whole = moved.read([0], 0, moved.length).values
    for size in (997, 4000):
        parts = [block.values for block in moved.blocks(size)]
        np.testing.assert_allclose(np.concatenate(parts), whole, rtol=1e-9, atol=1e-16)


def test_what_the_times_rest_on_is_kept(session):
    """Else lines fitted in what was converted would not allow for the jitter of the samples."""
    _, files, calibration, _ = session
    source = open_recording(files["lines_rising"][0])
    source.timing = Timing(jitter_s=1e-5)
    assert ConvertedRecording(source, "photodiode", calibration).timing == source.timing
    assert DrivenDisplacement(source, "drive", calibration).timing == source.timing


def test_the_readout_is_undone(session):
    """Against the poles' formula at each line of the recording."""
    _, files, calibration, _ = session
    source = open_recording(files["lines_rising"][0])
    plain = ConvertedRecording(source, "photodiode", calibration).trace("displacement").values
    stage = readout_stage(calibration, source.rate_hz)
    undone = ConvertedRecording(source, "photodiode", calibration, stages=[stage])
    values = undone.trace("displacement").values
    reach = stage.filter.reach
    assert np.isnan(values[:reach]).all()
    assert np.isfinite(values[reach:-reach]).all()
    inner = slice(reach, -reach)
    for at_hz in (87.1, 233.9):
        factor = (1 + 1j * at_hz / 5000.0) * (1 + 1j * at_hz / 1500.0)
        ratio = line(values[inner], at_hz, source.rate_hz) / line(
            plain[inner], at_hz, source.rate_hz
        )
        assert ratio == pytest.approx(factor, rel=2e-3)
    worth = undone.judge()
    assert worth.scale_u > ConvertedRecording(source, "photodiode", calibration).judge().scale_u
    assert not any("is not undone" in text for text in worth.cautions)
    assert any("amplifier and anti-alias filter are undone" in text for text in worth.cautions)


def test_a_servo_is_undone(session, tmp_path):
    _, files, calibration, _ = session
    source = open_recording(files["lines_rising"][0])
    stage = loop_stage(load_open_loop(loop_table(tmp_path / "loop.csv")), source.rate_hz)
    plain = ConvertedRecording(source, "photodiode", calibration).trace("displacement").values
    free = ConvertedRecording(source, "photodiode", calibration, stages=[stage])
    values, reach = free.trace("displacement").values, stage.filter.reach
    inner = slice(reach, -reach)
    for at_hz in (31.7, 87.1, 233.9):
        ratio = line(values[inner], at_hz, source.rate_hz) / line(
            plain[inner], at_hz, source.rate_hz
        )
        assert ratio == pytest.approx(1 + 40.0 / (1j * at_hz), rel=5e-3)


def test_the_drive_shows_what_the_actuator_moves(session):
    """The recorded drive through the fitted response, beside the simulated bench's truth."""
    simulated, files, calibration, _ = session
    source = open_recording(files["lines_rising"][0])
    driven = DrivenDisplacement(source, "drive", calibration)
    values, reach = driven.trace("displacement").values, driven.stage.filter.reach
    worth = driven.judge()
    drive = source.trace("drive").values[reach:-reach]
    for at_hz in (87.1, 141.3):
        moved = line(values[reach:-reach], at_hz, source.rate_hz)
        volts = line(drive, at_hz, source.rate_hz) * simulated.truth.divider
        true = abs(simulated.truth.actuator(at_hz))
        assert abs(moved / volts) == pytest.approx(true, rel=0.01)
    assert 0 < worth.relative_u < 0.01
    assert worth.used_fraction == pytest.approx(1 - 2 * reach / source.length)


@pytest.mark.parametrize(("corner_hz", "delay_s"), [(400.0, 12e-6), (1500.0, 150e-6)])
def test_the_drive_moves_what_the_fringe_shows(tmp_path, corner_hz, delay_s):
    """A slow filter and a late channel before the drive: the displacement is that of the fringe."""
    changed = {
        "adc.antialias": Measured.of(corner_hz, "Hz", 0.01 * corner_hz),
        "adc.channel_delay": Measured.of(delay_s, "s", 0.5e-6),
    }
    bench = built_in_bench().replace(changed)
    _, files = play(bench, 6, tmp_path, lines_s=6.0)
    calibration = calibrate(bench, **files)
    source = open_recording(files["lines_rising"][0])
    driven = DrivenDisplacement(source, "drive", calibration)
    undone = readout_stage(calibration, source.rate_hz)
    fringe = ConvertedRecording(source, "photodiode", calibration, stages=[undone])
    moved, seen = (one.trace("displacement").values for one in (driven, fringe))
    inner = slice(driven.stage.filter.reach, -driven.stage.filter.reach)
    u = driven.judge().relative_u
    for at_hz in (31.7, 87.1, 141.3, 233.9):
        ratio = line(moved[inner], at_hz, source.rate_hz) / line(seen[inner], at_hz, source.rate_hz)
        assert abs(ratio - 1) < 3 * u
    assert u < 0.008
    assert "with its channel's anti-alias filter and delay undone" in driven.judge().cautions[0]


def test_the_drive_channels_corner_and_delay_enter_the_u(session):
    """Against the formula: |if/f0/(1+if/f0)|·u/f0 and 2πf·u of the delay at the highest line."""
    _, files, calibration, _ = session
    rate_hz = open_recording(files["lines_rising"][0]).rate_hz
    plain = actuator_stage(calibration, rate_hz).relative_u
    turned = 1j * 233.9 / 1500.0
    pole = abs(turned / (1 + turned)) / 1500.0
    late = 2 * np.pi * 233.9
    for name, unit, value, u, effect in (
        ("antialias_corner", "Hz", 1500.0, 150.0, pole),
        ("channel_delay", "s", 12e-6, 2e-5, late),
    ):
        known = float(calibration.chain[name].u_magnitude)
        chain = {**calibration.chain, name: Measured.of(value, unit, u)}
        found = actuator_stage(replace(calibration, chain=chain), rate_hz).relative_u
        added = np.sqrt(found**2 - plain**2)
        assert added == pytest.approx(effect * np.sqrt(u**2 - known**2), rel=0.02)


@pytest.mark.parametrize("suffix", ["csv", "npy", "npz", "h5"])
def test_every_kind_of_file_holds_the_same_and_its_gaps(session, tmp_path, suffix, capsys):
    _, files, calibration, cal = session
    source = open_recording(files["lines_rising"][0])
    volts = source.trace("photodiode").values[:6000].copy()
    volts[1000:1100] = np.nan
    gappy, out = tmp_path / "gappy.csv", tmp_path / f"moved.{suffix}"
    rows = "\n".join(f"{k / 4000:.6f},{v:.9g}" for k, v in enumerate(volts))
    gappy.write_text(f"time_s,photodiode [V]\n{rows}\n", encoding="utf-8")
    assert run(["convert", str(gappy), "--calibration", cal, "--out", str(out), "--json"]) == 0
    document = json.loads(capsys.readouterr().out)
    assert document["gaps"] == 1
    back = open_recording(out)
    assert [(gap.index, gap.length) for gap in back.gaps] == [(1000, 100)]
    moved = ConvertedRecording(open_recording(gappy), "photodiode", calibration)
    found = back.trace(back.channels[0].name).values
    np.testing.assert_array_equal(found, moved.trace("displacement").values)
    if suffix == "npz":
        kept = json.loads(str(np.load(out)["midfringe"]))
        assert kept["uncertainty"] == document["uncertainty"]
        assert kept["gaps"] == [[1000, 100, 0.0]]


def bare(path, values, label="photodiode"):
    rows = "\n".join(f"{k / 4000:.6f},{v!r}" for k, v in enumerate(values.tolist()))
    path.write_text(f"time_s,{label}\n{rows}\n", encoding="utf-8")
    return open_recording(path)


def test_counts_are_told_from_volts_and_other_units_refused(session, tmp_path):
    _, files, calibration, _ = session
    volts = open_recording(files["lines_rising"][0]).trace("photodiode").values[:3000]
    counts = np.rint(volts / (10.0 / 2**16))
    expected = ConvertedRecording(
        bare(tmp_path / "v.csv", counts * (10.0 / 2**16), "photodiode [V]"),
        "photodiode",
        calibration,
    )
    for name, values, told in (
        ("counts", counts, "it is taken as ADC counts"),
        ("volts", counts * (10.0 / 2**16), "it is taken as volts"),
    ):
        source = bare(tmp_path / f"{name}.csv", values)
        found = ConvertedRecording(source, "photodiode", calibration)
        np.testing.assert_allclose(
            found.trace("displacement").values, expected.trace("displacement").values, atol=1e-15
        )
        assert any(told in text for text in found.judge().cautions)
    with pytest.raises(CalibrationError, match="'photodiode' must be in V, got A"):
        ConvertedRecording(
            bare(tmp_path / "a.csv", volts, "photodiode [A]"), "photodiode", calibration
        )


def test_a_plot_is_drawn_and_nothing_else_changes(session, tmp_path, capsys):
    _, files, _, cal = session
    out, plot = tmp_path / "moved.npz", tmp_path / "moved.png"
    arguments = ["convert", files["lines_rising"][0], "--calibration", cal, "--out", str(out)]
    assert run([*arguments, "--plot", str(plot)]) == 0
    assert plot.read_bytes().startswith(b"\x89PNG")
    assert run([*arguments, "--overwrite", "--plot", str(tmp_path / "moved.txt")]) == 2
    assert "--plot must end in .png, .pdf or .svg" in capsys.readouterr().err


def test_the_course_is_the_envelope(session):
    _, files, calibration, _ = session
    moved = ConvertedRecording(open_recording(files["lines_rising"][0]), "photodiode", calibration)
    values = moved.trace("displacement").values
    course = course_of(moved)
    assert np.nanmin(course.least) == values.min()
    assert np.nanmax(course.largest) == values.max()
    edges = np.linspace(0, values.size, course.time_s.size + 1).astype(int)
    for k in (0, 7, course.time_s.size - 1):
        part = values[edges[k] : edges[k + 1]]
        assert (course.least[k], course.largest[k]) == (part.min(), part.max())
    assert (course.left_out == 0).all()


def test_command_with_filters(session, tmp_path, capsys):
    _, files, _, cal = session
    rising = files["lines_rising"][0]
    table = loop_table(tmp_path / "loop.csv")
    arguments = ["convert", rising, "--calibration", cal, "--json"]
    for number, options in enumerate((["--undo-readout"], ["--open-loop", table], ["--actuator"])):
        out = str(tmp_path / f"{number}.npz")
        assert run([*arguments, *options, "--out", out]) == 0
        document = json.loads(capsys.readouterr().out)
        assert 0.1 < document["used_fraction"] < 1.0
        assert document["uncertainty"]["systematic"]["value"] > 0
    out = str(tmp_path / "x.npz")
    assert run([*arguments, "--actuator", "--quantity", "phase", "--out", out]) == 2
    assert "--actuator gives displacement from the drive" in capsys.readouterr().err
    old = ["convert", rising, "--calibration", str(SAMPLE), "--actuator", "--out", out]
    assert run(old) == 2
    assert "keeps no response of the actuator between its lines" in capsys.readouterr().err


def test_a_ringing_servo_gives_exit_code_one(session, tmp_path, capsys):
    """|1 + G| = 0.005 all over the band, by hand: what is left is noise, made 200 times larger."""
    _, files, _, cal = session
    table, out = tmp_path / "ring.csv", tmp_path / "moved.npz"
    text = "frequency [Hz],magnitude,phase [deg]\n20,0.995,180\n400,0.995,180\n"
    table.write_text(text, encoding="utf-8")
    arguments = ["convert", files["lines_rising"][0], "--calibration", cal, "--out", str(out)]
    assert run([*arguments, "--open-loop", str(table), "--json"]) == 1
    told = capsys.readouterr()
    document = json.loads(told.out)
    assert [
        r.split(": ")[1] for r in document["reasons"] if r.startswith("the servo rings at")
    ] == ["|1 + G| is 0.005, at least 0.1 is needed"]
    cautions = document["cautions"]
    assert any("by 1 + G (G is counted such that a large positive one holds" in c for c in cautions)
    assert any("counts as exact in magnitude and phase" in text for text in cautions)
    assert "the servo rings at" in told.err


def test_a_recording_shorter_than_the_filter_gives_exit_code_one(session, tmp_path, capsys):
    _, files, _, cal = session
    volts = open_recording(files["lines_rising"][0]).trace("photodiode").values[:60]
    bare(tmp_path / "short.csv", volts, "photodiode [V]")
    table = loop_table(tmp_path / "loop.csv")
    arguments = ["convert", str(tmp_path / "short.csv"), "--calibration", cal, "--json"]
    arguments += ["--open-loop", table, "--out", str(tmp_path / "x.npz")]
    assert run(arguments) == 1
    document = json.loads(capsys.readouterr().out)
    assert document["used_fraction"] == 0
    assert "no sample has the filter's reach of samples around it" in document["reasons"]


# The peak of this program alone: ru_maxrss would begin with that of the tests that start it.
MEMORY = """
import sys
from pathlib import Path
from metro.commandline import run
code = run(sys.argv[1:])
peak = [row for row in Path("/proc/self/status").read_text().splitlines() if row[:5] == "VmHWM"]
print(code, peak[0].split()[1])
"""


@pytest.mark.slow
def test_memory_does_not_grow_with_the_recording(tmp_path):
    """200 MB of int16 become 1.6 GB of NPZ in less than 300 MB, the bound for reading any recording."""
    from big_recording import write_recording

    recording, out, cal = (tmp_path / name for name in ("big.mfr", "big.npz", "cal.json"))
    samples = write_recording(recording, 200e6)
    document = load(SAMPLE).to_dict()
    for name, volts in (("low", -2.0), ("high", 2.0)):
        document["extremes"][name]["value"] = volts
    cal.write_text(json.dumps(document), encoding="utf-8")
    arguments = ["convert", str(recording), "--calibration", str(cal), "--out", str(out), "--quiet"]
    done = subprocess.run(
        [sys.executable, "-c", MEMORY, *arguments, "--json"],
        capture_output=True,
        text=True,
        check=True,
    )
    code, kilobytes = map(int, done.stdout.splitlines()[-1].split())
    assert code == 0, done.stderr
    assert out.stat().st_size > 16 * samples
    assert kilobytes < 300_000
