"""Every result shows itself in a notebook, and converts to dicts, arrays and uncertain numbers."""

import json
from pathlib import Path

import numpy as np
import pytest

import calibration
import metro
from calibration.driven_fringe import fit_driven_fringe_si
from calibration.record import load
from calibration.spectrum import find_spectrum
from firmware_bridge.opening import open_recording
from metro.chain import Chain
from metro.expectation import expect
from metro.output import to_json

RATE_HZ = 4000.0
SAMPLE = Path(__file__).parent / "samples" / "calibration-1.json"


@pytest.fixture(scope="module")
def record():
    t = np.arange(40000) / RATE_HZ
    noise = np.random.default_rng(4).normal(0, 1e-3, t.size)
    return 0.2 * np.cos(2 * np.pi * 31.7 * t) + 0.1 * np.cos(2 * np.pi * 87.1 * t + 1) + noise


@pytest.fixture(scope="module")
def fit(record):
    return calibration.fit_lines(metro.Quantity(record, "V"), "4 kHz", ["31.7 Hz", "87.1 Hz"])


def test_lines(fit):
    page = fit._repr_html_()
    assert str(fit.lines[0].amplitude) in page
    assert "data:image/png" in page
    rows = fit.to_numpy()
    assert rows["amplitude"] == pytest.approx([0.2, 0.1], abs=5 * rows["u_amplitude"].max())
    assert rows["trustworthy"].all()
    total = sum(line.amplitude.to_ufloat() for line in fit.lines)
    assert total.std_dev == pytest.approx(np.hypot(*rows["u_amplitude"]), rel=1e-12)
    assert json.loads(to_json(fit.to_dict()))["lines"][0]["frequency"]["value"] == 31.7


def test_spectrum(tmp_path, record):
    np.savez(tmp_path / "x.npz", light=record, rate=RATE_HZ)
    found = find_spectrum(open_recording(tmp_path / "x.npz", rate="4 kHz"), "light")
    page = found._repr_html_()
    (at_hz,) = [x.frequency_hz for x in found.lines if abs(x.frequency_hz - 31.7) < 0.3]
    assert f"{at_hz:.6g} Hz" in page
    assert "data:image/png" in page
    rows = found.to_numpy()
    assert rows.shape == (found.welch.frequency_hz.size, 3)
    assert (rows[:, 2] > 0).all()


def test_recording(tmp_path, record):
    np.savez(tmp_path / "x.npz", light=record, rate=RATE_HZ)
    page = open_recording(tmp_path / "x.npz", rate="4 kHz")._repr_html_()
    assert "40000 at 4000 Hz" in page
    assert "light" in page
    assert "data:image/png" in page


def test_fringe():
    t = np.arange(20000) / RATE_HZ
    noise = np.random.default_rng(5).normal(0, 1e-3, t.size)
    volts = 2 + np.cos(1.2 + 2 * np.cos(2 * np.pi * 31.7 * t)) + noise
    found = fit_driven_fringe_si(volts, RATE_HZ, [31.7])
    assert str(found.phase_amplitude[0]) in found._repr_html_()
    document = json.loads(json.dumps(found.to_dict()))
    assert document["phase_amplitude"][0]["value"] == pytest.approx(2, abs=0.01)


def test_calibration():
    kept = load(SAMPLE)
    page = kept._repr_html_()
    assert str(kept.readout_slope) in page
    assert "data:image/png" in page
    assert kept.readout_slope.to_ufloat().std_dev == kept.readout_slope.u_magnitude


def test_expectation():
    bench = metro.Bench.of(wavelength="632.9908 nm", power="80 uW", responsivity="0.4 A/W")
    page = expect(Chain(bench), "displacement", 1e-9)._repr_html_()
    assert "displacement" in page
    assert "1 nm" in page
