"""The spectrum of a simulated session beside what its bench should have, calibrated."""

import json

import numpy as np
import pytest
from sessions import BENCH_FILE, built_in_bench, play

from calibration import calibrate
from calibration.spectrum_reading import read_spectrum
from firmware_bridge import open_recording
from metro.commandline import run
from metro.output import to_json


@pytest.fixture(scope="module")
def session(tmp_path_factory):
    folder = tmp_path_factory.mktemp("session")
    _, files = play(built_in_bench(), 6, folder)
    calibration = calibrate(built_in_bench(), **files)
    path = folder / "calibration.json"
    path.write_text(to_json(calibration.to_dict()))
    return files, calibration, path


def test_between_the_lines_the_motion_that_the_bench_states(session):
    # The bench file states the motion at its lines; 100 Hz to 220 Hz lies between two of them.
    files, calibration, _ = session
    recording = open_recording(files["lines_rising"][0])
    found, worth = read_spectrum(
        recording, "photodiode", built_in_bench(), calibration, "displacement"
    )
    frequency = found.welch.frequency_hz
    between = (frequency > 155) & (frequency < 220)
    assert np.median(found.ratio[between]) == pytest.approx(1.0, abs=0.12)
    lines = {round(line.frequency_hz, 1): line.amplitude for line in found.lines}
    fitted = {
        float(e.frequency.magnitude): float(e.magnitude.magnitude) for e in calibration.actuator
    }
    assert set(fitted) <= set(lines)
    # 0.16 V drives each line; the simulated drive and power differ a little from that.
    for f, per_volt in fitted.items():
        assert lines[f] == pytest.approx(0.16 * per_volt, rel=0.05)
    assert 0 < worth.relative_u < 0.01


def test_strain_is_displacement_over_the_arm(session, capsys):
    files, _, path = session
    found = {}
    for quantity in ("displacement", "strain"):
        code = run(["spectrum", files["lines_rising"][0], "--channel", "photodiode", "--quantity",
                    quantity, "--calibration", str(path), "--bench", str(BENCH_FILE), "--json"])  # fmt: skip
        assert code == 0
        found[quantity] = json.loads(capsys.readouterr().out)
    arm = built_in_bench().magnitude("arms.length")
    for key in ("density", "expected"):
        moved, strained = (np.array(found[q][key]["value"]) for q in ("displacement", "strain"))
        np.testing.assert_allclose(strained * arm, moved, rtol=1e-9)
    np.testing.assert_allclose(
        found["strain"]["ratio"]["value"], found["displacement"]["ratio"]["value"], rtol=1e-9
    )
    assert found["strain"]["density"]["unit"] == "1/Hz**0.5"
    assert found["displacement"]["systematic"] > 0


@pytest.fixture(scope="module")
def ratios(tmp_path_factory):
    """Return bins [Hz] and measured over expected of a minute near mid-fringe, in bins of 0.25 Hz."""
    folder, bench = tmp_path_factory.mktemp("minute"), built_in_bench()
    _, files = play(bench, 6, folder, lines_s=60.0)
    recording = open_recording(files["lines_rising"][0])
    found, _ = read_spectrum(
        recording,
        "photodiode",
        bench,
        calibrate(bench, **files),
        "displacement",
        resolution_hz=0.25,
    )
    return found.welch.frequency_hz, found.ratio


@pytest.mark.parametrize(
    ("low_hz", "high_hz"),
    [(1, 3), (3, 10), (10, 30), (30, 100), (64, 84), (100, 300), (300, 1000), (1000, 1900)],
)
def test_the_expected_noise_of_the_built_in_bench_holds(ratios, low_hz, high_hz):
    """The median of each band; points of two digits and power laws between them are within 10 %."""
    frequency, ratio = ratios
    inside = (frequency >= low_hz) & (frequency < high_hz)
    assert np.median(ratio[inside]) == pytest.approx(1.0, abs=0.12)
