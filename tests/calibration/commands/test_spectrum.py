"""``midfringe spectrum``: against scipy on the same samples, its JSON, what is expected, bad input."""

import json

import numpy as np
import pytest

from metro.commandline import run

RATE = 2000.0
BENCH = """
[laser]
wavelength = "632.9908 nm"
[adc]
rate = "2 kHz"
noise = "1 mV"
[fringe]
low = "0.5 V"
high = "2.5 V"
"""


@pytest.fixture(autouse=True)
def no_bench(monkeypatch):
    monkeypatch.delenv("MIDFRINGE_BENCH", raising=False)


def spectrum(capsys, *arguments):
    """Return (exit code, stdout, stderr) of the program."""
    code = run(["spectrum", *map(str, arguments)])
    out, err = capsys.readouterr()
    return code, out, err


def _volts(n=20_000):
    rng = np.random.default_rng(1)
    t = np.arange(n) / RATE
    return 1.5 + 0.02 * np.cos(2 * np.pi * 211.3 * t) + 1e-3 * rng.standard_normal(n)


def _write(path, volts):
    t = np.arange(len(volts)) / RATE
    rows = [f"{a:.4f},{b!r}" for a, b in zip(t, volts.tolist(), strict=True) if np.isfinite(b)]
    path.write_text("\n".join(["time,photodiode", "s,V", *rows]) + "\n")
    return path


@pytest.fixture
def recording(tmp_path):
    return _write(tmp_path / "a.csv", _volts())


@pytest.fixture
def bench(tmp_path):
    path = tmp_path / "bench.toml"
    path.write_text(BENCH)
    return path


def test_json_and_scipy(capsys, recording):
    signal = pytest.importorskip("scipy.signal")
    code, out, _ = spectrum(capsys, recording, "--json", "--resolution", "2Hz")
    found = json.loads(out)
    assert code == 0
    assert set(found) >= {
        "frequency", "density", "window", "expected", "ratio", "used_fraction", "noise_bandwidth",
        "segments", "lines",
    }  # fmt: skip
    frequency, power = signal.welch(_volts(), RATE, "hann", 1000)
    np.testing.assert_allclose(found["frequency"]["value"], frequency)
    np.testing.assert_allclose(found["density"]["value"], np.sqrt(power), rtol=1e-10, atol=1e-16)
    assert (found["density"]["unit"], found["window"]) == ("V/Hz**0.5", "hann")
    assert found["noise_bandwidth"]["value"] == pytest.approx(3.0)
    assert found["segments"] == 39
    (line,) = found["lines"]
    assert line["frequency"]["value"] == pytest.approx(211.3, abs=0.05)
    assert line["amplitude"]["value"] == pytest.approx(0.02, rel=0.01)


def test_the_noise_expected_is_that_of_the_converter(capsys, recording, bench):
    # 1 mV rms white over 1 kHz is 1 mV/√(1000 Hz) = 31.6 µV/√Hz, and that is what the file holds.
    code, out, err = spectrum(capsys, recording, "--bench", bench, "--json")
    found = json.loads(out)
    assert code == 0
    expected = np.array(found["expected"]["value"])
    np.testing.assert_allclose(expected, 1e-3 / np.sqrt(1000.0), rtol=1e-6)
    assert np.median(found["ratio"]["value"]) == pytest.approx(1.0, abs=0.05)
    assert "lacks, for want of entries in the bench: shot" in err


def test_gaps_are_told_and_left_out(capsys, tmp_path):
    volts = _volts()
    volts[9000:9400] = np.nan
    code, out, _ = spectrum(
        capsys, _write(tmp_path / "g.csv", volts), "--json", "--resolution", "10Hz"
    )
    found = json.loads(out)
    assert (code, found["gaps"]) == (0, 1)
    assert found["segments"] == (9000 // 100 - 1) + (10_600 // 100 - 1)
    assert found["used_fraction"] == pytest.approx(0.98)


def test_a_line_in_a_short_record_is_found(capsys, tmp_path):
    rate_hz, count = 10_000, 1000
    t = np.arange(count) / rate_hz
    noise = np.random.default_rng(7).normal(0.0, 0.01, count)
    rows = np.column_stack((t, 1.0 + 0.2 * np.cos(2 * np.pi * 1000 * t) + noise))
    np.savetxt(tmp_path / "s.csv", rows, delimiter=",", header="time (s),pd (V)", comments="")
    code, out, _ = spectrum(capsys, tmp_path / "s.csv", "--json")
    found = json.loads(out)
    assert code == 0
    (line,) = found["lines"]
    bin_hz = rate_hz / found["segment"]
    assert 1000 / bin_hz >= 8
    assert line["frequency"]["value"] == pytest.approx(1000, abs=0.2 * bin_hz)
    assert line["amplitude"]["value"] == pytest.approx(0.2, rel=0.02)


def test_a_stretch_and_files(capsys, recording, bench, tmp_path):
    pytest.importorskip("matplotlib")
    table, plot = tmp_path / "s.csv", tmp_path / "s.png"
    arguments = (recording, "--bench", bench, "--from", "1s", "--to", "3s")
    code, out, _ = spectrum(capsys, *arguments, "--out", table, "--plot", plot)
    assert code == 0
    assert "one-sided amplitude density" in out
    rows = table.read_text().splitlines()
    assert rows[:2] == ["frequency,density,u,expected,ratio", "Hz,V/Hz**0.5,V/Hz**0.5,V/Hz**0.5,1"]
    assert len(rows) == 2 + 256 // 2 + 1
    assert plot.read_bytes().startswith(b"\x89PNG")
    code, out, err = spectrum(capsys, *arguments, "--out", table)
    assert (code, out, err.count("\n")) == (2, "", 1)


@pytest.mark.parametrize(
    ("arguments", "message"),
    [
        (["--resolution", "500Hz"], "--resolution must lie between 0.1 Hz and 125 Hz"),
        (["--resolution", "0.01Hz"], "--resolution must lie between"),
        (["--quantity", "strain"], "--quantity strain needs --calibration"),
        (["--undo-readout"], "--undo-readout needs --calibration"),
        (["--calibration", "missing.json"], "missing.json"),
        (["--channel", "drive"], "no channel named 'drive'"),
        (["--from", "20s"], "has no sample from 20 s"),
    ],
)
def test_bad_input_is_one_line(capsys, recording, arguments, message):
    code, out, err = spectrum(capsys, recording, *arguments)
    assert (code, out, err.count("\n")) == (2, "", 1)
    assert message in err


def test_gaps_that_leave_no_segment(capsys, tmp_path):
    volts = _volts(4000)
    volts[::50] = np.nan
    path = _write(tmp_path / "g.csv", volts)
    code, out, err = spectrum(capsys, path, "--resolution", "4Hz")
    assert (code, out) == (2, "")
    assert "give a coarser --resolution" in err
    assert spectrum(capsys, path)[0] == 0
