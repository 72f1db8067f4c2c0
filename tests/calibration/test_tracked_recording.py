"""Free-running recordings converted: against a known motion, in pieces, with errors of the extremes."""

import json
import subprocess
import sys
from itertools import pairwise
from pathlib import Path

import numpy as np
import pytest
from sessions import built_in_bench, free_session, spread, stated

from calibration.analysis import calibrate
from calibration.errors import CalibrationError
from calibration.lines import fit_lines_si
from calibration.record import load, parse
from calibration.tracked_recording import TrackedRecording
from firmware_bridge.opening import open_recording
from metro.commandline import run
from metro.kernel.phase import phase_per_metre

SAMPLE = Path(__file__).parent / "samples" / "calibration-1.json"
RATE_HZ, COUNT, PILOT_HZ = 4000.0, 12_000, 401.3
TIME = np.arange(COUNT) / RATE_HZ


def slow(time):
    return 0.4 + 9.0 * time + 2.0 * np.sin(2 * np.pi * 0.2 * time)


def moved(time=TIME):
    """Drift over ten fringes, a line, and a pilot of 0.3 rad in step with its drive [rad]."""
    fast = 0.1 * np.cos(2 * np.pi * 87.1 * time) + 0.3 * np.cos(2 * np.pi * PILOT_HZ * time + 0.6)
    return slow(time) + fast


def written(path, phase, noise=0.003, seed=1, drive=1.0, gap=None):
    """Write volts between 0.5 V and 3.5 V with the pilot's drive."""
    rng = np.random.default_rng(seed)
    volts = 2.0 + 1.5 * (np.cos(phase) + noise * rng.normal(size=len(phase)))
    driven = drive * np.cos(2 * np.pi * PILOT_HZ * TIME[: len(phase)] + 0.6)
    driven += 1e-4 * rng.normal(size=len(phase))
    if gap is not None:
        volts[gap] = driven[gap] = np.nan
    np.savez(path, time_s=TIME[: len(phase)], photodiode=volts, drive=driven)
    return str(path)


def calibration(low=0.5, high=3.5, u=0.0):
    document = load(SAMPLE).to_dict()
    for name, volts in (("low", low), ("high", high)):
        document["extremes"][name] |= {"value": volts, "u": u}
    document["extremes"]["covariance"] = 0.0
    return parse(json.dumps(document), "made.json")


def metres_per_rad(kept):
    chain = kept.chain
    return 1 / phase_per_metre(
        float(chain["wavelength"].magnitude), float(chain["index"].magnitude), 1
    )


@pytest.fixture(scope="module")
def recording(tmp_path_factory):
    return written(tmp_path_factory.mktemp("free") / "free.npz", moved(), gap=slice(4500, 4540))


def tracked(path, kept=None, **options):
    options = {"drive": "drive", **options}
    return TrackedRecording(
        open_recording(path), "photodiode", kept or calibration(), PILOT_HZ, **options
    )


def both_of(converted):
    return converted.read([0, 1], 0, converted.length).values.T


def test_displacement_is_the_motion(recording):
    kept = calibration()
    converted = tracked(recording, kept)
    values, carried = both_of(converted)
    error = values / metres_per_rad(kept) - moved()
    worth = converted.judge()
    assert worth.reasons == []
    assert np.isnan(values[4500:4540]).all()
    assert np.isnan(carried[4500:4540]).all()
    inverted = carried == 0
    assert 0.3 < inverted.mean() < 0.7
    assert worth.used_fraction == pytest.approx(1 - 40 / COUNT)
    assert worth.carried_fraction == np.mean(carried == 1)
    # whole fringes over ten of them, and the noise that is told
    noise = np.sqrt(np.mean(error[inverted] ** 2)) * metres_per_rad(kept)
    assert noise == pytest.approx(worth.noise, rel=0.1)
    left_out = np.sqrt(np.mean(error[carried == 1] ** 2)) * metres_per_rad(kept)
    assert left_out == pytest.approx(worth.carried_noise, rel=0.15)  # the line at 87.1 Hz


def test_the_sign_is_that_of_the_drive(recording, tmp_path):
    # the calibration's lowest line has phase zero: the motion goes with the drive
    assert np.cos(float(load(SAMPLE).actuator[0].phase.magnitude)) > 0
    against = written(tmp_path / "against.npz", moved(), drive=-1.0)
    for path, sign in ((recording, 1.0), (against, -1.0)):
        converted = tracked(path)
        values, _ = both_of(converted)
        assert np.sign(values[-1] - values[0]) == sign
        assert any("as the calibration found at" in text for text in converted.judge().assumptions)
    bare = tracked(recording, drive=None).judge()
    assert any("the sign is not known" in text for text in bare.assumptions)


def test_no_boundary_shows(recording):
    one = tracked(recording)
    whole = both_of(one)
    rng = np.random.default_rng(3)
    edges = np.unique([0, COUNT, *rng.integers(0, COUNT, 9)])
    parts = [one.read([0, 1], a, b).values.T for a, b in pairwise(edges.tolist())]
    np.testing.assert_array_equal(np.concatenate(parts, axis=1), whole)
    pieces = tracked(recording, piece=3000)
    assert pieces.course.pieces > 2
    values, carried = both_of(pieces)
    np.testing.assert_array_equal(np.isnan(values), np.isnan(whole[0]))
    same = (carried == 0) & (whole[1] == 0)
    assert same.sum() > 0.999 * np.count_nonzero(whole[1] == 0)
    np.testing.assert_allclose(values[same], whole[0][same], atol=1e-11)


def test_a_stretch_is_the_whole_but_for_whole_fringes(recording):
    whole, _ = both_of(tracked(recording, quantity="phase"))
    stretch = tracked(recording, quantity="phase", from_s=0.75, to_s=2.5)
    values, carried = both_of(stretch)
    assert np.isnan(values[:3000]).all()
    assert np.isnan(values[10_000:]).all()
    inverted = np.flatnonzero(carried == 0)
    turns = (whole[inverted] - values[inverted]) / (2 * np.pi)
    assert np.ptp(turns) < 1e-3
    assert turns[0] == pytest.approx(round(turns[0]), abs=1e-3)


@pytest.mark.slow
def test_the_error_of_the_extremes_is_covered(tmp_path):
    """The rms over the inverted samples and over 24 draws of both extremes against its u."""
    u, pulls = 0.01, []
    path = written(tmp_path / "quiet.npz", moved()[:8000], noise=1e-4)
    for seed in range(24):
        low, high = np.array([0.5, 3.5]) + u * np.random.default_rng(seed).normal(size=2)
        converted = tracked(path, calibration(low, high, u), quantity="phase", piece=1 << 20)
        values, carried = both_of(converted)
        error = values[carried == 0] - moved()[:8000][carried == 0]
        pulls.append(np.sqrt(np.mean(error**2)) / converted.judge().periodic_u)
    assert 0.7 < spread(pulls) < 1.35


@pytest.mark.slow
def test_other_extremes_than_the_calibrations_are_told(recording):
    kept = calibration(0.45, 3.2)
    worth = tracked(recording, kept).judge()
    assert any("--own-extremes takes the recording's" in reason for reason in worth.reasons)
    healed = tracked(recording, kept, own=True)
    assert healed.judge().reasons == []
    assert healed.extremes.low_v == pytest.approx(0.5, abs=0.005)
    with pytest.raises(CalibrationError, match="runs over no whole fringe"):
        tracked(recording, kept, own=True, from_s=0.0, to_s=0.15)


@pytest.mark.parametrize("suffix", ["csv", "npz", "h5"])
def test_every_file_marks_what_is_carried(recording, tmp_path, suffix, capsys):
    cal, out = tmp_path / "cal.json", tmp_path / f"moved.{suffix}"
    cal.write_text(json.dumps(calibration().to_dict()), encoding="utf-8")
    arguments = ["convert", recording, "--calibration", str(cal), "--pilot", "401.3Hz", "--json"]
    assert run([*arguments, "--out", str(out)]) == 0
    document = json.loads(capsys.readouterr().out)
    assert set(document["uncertainty"]) == {
        "systematic", "small_motion", "periodic", "random", "carried",
    }  # fmt: skip
    assert document["uncertainty"]["systematic"]["value"] < 1e-5  # wavelength and index alone
    assert document["uncertainty"]["small_motion"]["value"] > 1e-4
    back = open_recording(out)
    assert [(gap.index, gap.length) for gap in back.gaps] == [(4500, 40)]
    values, carried = both_of(tracked(recording))
    np.testing.assert_array_equal(back.trace("displacement").values, values)
    np.testing.assert_array_equal(back.trace("carried").values, carried)


@pytest.mark.parametrize(
    ("options", "words"),
    [
        (["--pilot", "401.3Hz", "--slope", "rising"], "it goes without --slope"),
        (["--pilot", "401.3Hz", "--undo-readout"], "it goes without --undo-readout"),
        (["--pilot", "401.3Hz", "--actuator"], "it goes without --actuator"),
        (["--pilot", "1.9kHz"], "below 0.45 of the rate"),
        (["--pilot", "300Hz"], "the drive shows no pilot at 300 Hz"),
        (["--own-extremes"], "--own-extremes is for a free-running bench: it needs --pilot"),
    ],
)
def test_what_does_not_go_together_is_refused(recording, tmp_path, options, words, capsys):
    cal = tmp_path / "cal.json"
    cal.write_text(json.dumps(calibration().to_dict()), encoding="utf-8")
    out = tmp_path / "x.npz"
    arguments = ["convert", recording, "--calibration", str(cal), "--out", str(out), *options]
    assert run(arguments) == 2
    assert words in capsys.readouterr().err
    assert not out.exists()


@pytest.mark.slow
def test_lines_of_free_benches_are_covered(tmp_path):
    """Lines in the inverted samples of converted recordings against the truth of simulated benches.

    Without pick-up and tilt, which only both slopes or a blocked beam tell. The rms of 6 × 4 pulls,
    four of which share their extremes, has a standard deviation of some 20 %; of 30 × 4 it was 0.97.
    """
    bench = stated(built_in_bench(), drive__pickup=1e-9, actuator__tilt=1e-9)
    pulls = []
    for seed in range(6):
        simulated, files, tones = free_session(bench, seed, tmp_path / str(seed))
        (free,) = files.pop("lines_free")
        converted = TrackedRecording(
            open_recording(free), "photodiode", calibrate(bench, **files), 233.9, drive="drive"
        )
        values, carried = both_of(converted)
        fit = fit_lines_si(
            np.where(carried == 0, values, np.nan),
            converted.rate_hz,
            [tone.frequency_hz for tone in tones],
        )
        worth = converted.judge()
        assert worth.reasons == []
        for line, tone in zip(fit.lines, tones, strict=True):
            gain = simulated.truth.actuator(tone.frequency_hz)
            true = abs(gain * simulated.truth.readout_gain(tone.frequency_hz)) * tone.amplitude_v
            size = float(line.amplitude.magnitude)
            u = np.hypot(float(line.amplitude.u_magnitude), worth.small_u * size)
            pulls.append((size - true) / u)
    assert 0.55 < spread(pulls) < 1.5


# The peak of this program alone: ru_maxrss would begin with that of the tests that start it.
MEMORY = """
import sys
from itertools import pairwise
from pathlib import Path
from metro.commandline import run
code = run(sys.argv[1:])
peak = [row for row in Path("/proc/self/status").read_text().splitlines() if row[:5] == "VmHWM"]
print(code, peak[0].split()[1])
"""


@pytest.mark.slow
def test_memory_does_not_grow_with_the_recording(tmp_path):
    """Five million samples, 120 MB of NPZ, in less than 300 MB, the bound for reading any recording."""
    from big_recording import write_free_recording

    recording, out, cal = (str(tmp_path / name) for name in ("big.mfr", "big.npz", "cal.json"))
    samples = write_free_recording(recording, 20e6)
    Path(cal).write_text(json.dumps(calibration(-1.0, 1.0).to_dict()), encoding="utf-8")
    arguments = ["convert", recording, "--calibration", cal, "--pilot", "401.3Hz", "--out", out]
    done = subprocess.run(
        [sys.executable, "-c", MEMORY, *arguments, "--json", "--quiet"],
        capture_output=True,
        text=True,
        check=True,
    )
    code, kilobytes = map(int, done.stdout.splitlines()[-1].split())
    assert code == 0, done.stderr
    assert Path(out).stat().st_size > 24 * samples
    assert kilobytes < 300_000
