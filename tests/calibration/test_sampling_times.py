import json

import numpy as np
import pytest
from click.testing import CliRunner
from text_board import arrivals_of, record_chunks

from calibration.commands.lines import lines
from calibration.line_reading import read_lines
from calibration.sampling_times import HOST_ONLY
from firmware_bridge.timing import Timing
from firmware_bridge.trace import Trace

RATE_HZ, LINE_HZ, AMPLITUDE, PHASE = 200.0, 61.3, 1.5, 0.7


def sampled(seed, jitter_s, n=20_000):
    rng = np.random.default_rng(seed)
    times_s = np.arange(n) / RATE_HZ + rng.normal(0, 1, n) * jitter_s
    wave = AMPLITUDE * np.cos(2 * np.pi * LINE_HZ * times_s + PHASE)
    return times_s, wave + rng.normal(0, 0.05, n)


def test_the_jitters_loss_is_put_back_within_its_uncertainty():
    jitter_s = 1e-3  # takes 7.2 %
    inside = 0
    for seed in range(40):
        _, values = sampled(seed, jitter_s, 4000)
        trace = Trace("pd", "V", values, RATE_HZ, timing=Timing(False, jitter_s, jitter_s / 90))
        (line,) = read_lines(trace, None, [LINE_HZ]).lines
        amplitude = line.amplitude
        assert abs(amplitude.magnitude / AMPLITUDE - 1) < 0.02
        inside += abs(amplitude.magnitude - AMPLITUDE) < amplitude.expanded(0.95).magnitude
    assert inside >= 34  # of 40: below it with p = 0.01 at 95 % coverage


def test_steady_times_leave_a_fit_as_it_is():
    _, values = sampled(1, 0.0, 4000)
    plain = read_lines(Trace("pd", "V", values, RATE_HZ), None, [LINE_HZ])
    assert plain.remarks == ()
    assert plain.lines[0].amplitude.magnitude == pytest.approx(AMPLITUDE, abs=0.01)
    assert not plain.lines[0].is_phase_refused


def test_too_much_jitter_is_a_reason():
    _, values = sampled(1, 2e-3, 4000)
    trace = Trace("pd", "V", values, RATE_HZ, timing=Timing(False, 2e-3, 4e-5))
    (line,) = read_lines(trace, None, [LINE_HZ]).lines
    assert any("too much for a line of 61.3 Hz" in reason for reason in line.distrust_reasons)


def recorded(path, *, with_stamps, jitter_s=1e-3):
    rng = np.random.default_rng(11)
    times_s, values = sampled(11, jitter_s)
    arrivals = arrivals_of(times_s + 5.0, rng)
    chunks = [(float(arrivals[0]), b"x\n")]
    for arrived_s, moment_s, value in zip(arrivals, times_s, values, strict=True):
        stamp = b"%d " % round((moment_s + 3) * 1e6) if with_stamps else b""
        chunks.append((float(arrived_s), stamp + b"%.4f\n" % value))
    return record_chunks(path, chunks)[0]


@pytest.mark.slow
def test_a_text_board_with_stamps_goes_through_lines(tmp_path):
    recorded(tmp_path / "a.mfr", with_stamps=True)
    result = CliRunner().invoke(lines, [str(tmp_path / "a.mfr"), "--line", "61.3Hz", "--json"])
    (line,) = json.loads(result.stdout)["lines"]
    assert result.exit_code == 0, result.stderr
    assert abs(line["amplitude"]["value"] - AMPLITUDE) < 4 * line["amplitude"]["u"] < 0.08
    assert abs(line["phase"]["value"] - PHASE) < 4 * line["phase"]["u"]
    assert "time stamps scatter by 0.00" in result.stderr


@pytest.mark.slow
def test_phases_by_the_hosts_clock_alone_are_refused(tmp_path):
    recorded(tmp_path / "a.mfr", with_stamps=False, jitter_s=0.0)
    result = CliRunner().invoke(lines, [str(tmp_path / "a.mfr"), "--line", "61.3Hz", "--json"])
    (line,) = json.loads(result.stdout)["lines"]
    assert result.exit_code == 1
    assert line["phase"] is None
    assert HOST_ONLY in line["reasons"]
