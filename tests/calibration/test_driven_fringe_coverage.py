"""Coverage of the driven fringe: 95 % intervals hold 95 times in 100, and no wrong minimum is taken.

The quick versions run small records; the slow ones and the trials the size that the acceptance names:
20 000 samples, at least 2.5·(m + 5) samples a period, 20 dB (`long_runs.fringe_statistics`).
"""

import json
import sys

import numpy as np
import pytest
from long_runs import fringe_statistics as statistics

from calibration.driven_fringe import fit_driven_fringe_si


def run(kind, count, samples):
    records = [statistics.fitted(kind, seed, samples) for seed in range(count)]
    (row,) = statistics.rows_of(records)
    return row


@pytest.mark.slow
@pytest.mark.parametrize("kind", ["deep", "given", "drift"])
def test_coverage_of_small_records(kind):
    count = 30 if kind == "drift" else 60
    row = run(kind, count, 3000)
    # at 95 %, 52 of 60 or 25 of 30 are inside in 99 of 100 runs (binomial); the seeds are fixed
    assert round(row["coverage"][0] * count) >= (25 if count == 30 else 52)
    assert row["wrong"] == 0


@pytest.mark.slow
def test_no_bias_without_noise_and_no_depth_without_ground():
    exact = run("exact", 12, 3000)
    assert exact["worst"] < 1e-5
    assert exact["wrong"] == 0
    nothing = run("undetermined", 12, 3000)
    assert nothing["undetermined"] == 12
    assert statistics.verdict(exact) == statistics.verdict(nothing) == []


@pytest.mark.parametrize(("depth", "seed"), [(1.4, 1), (7.3, 2), (29.0, 3), (104.0, 4), (251.0, 5)])
def test_the_fit_misses_as_the_noise_does(depth, seed):
    # Gauss–Markov: in white noise the least-squares estimate linearised about the truth has the
    # variance σ²(JᵀJ)⁻¹ exactly, and no unbiased one has less. The fit must follow it record by
    # record: coverage then is that of the noise itself, whatever the depth.
    count, half, sigma = 20_000, 0.8, 0.8 / np.sqrt(200)
    rng = np.random.default_rng(seed)
    turn = 2 * np.pi / (2.5 * (depth + 5)) * 0.83
    angle = turn * np.arange(count) + 0.7
    phase = 1.1 + depth * np.cos(angle)
    noise = sigma * rng.normal(size=count)
    sine = -half * np.sin(phase)
    slopes = [np.ones(count), np.cos(phase), sine * np.cos(angle), -sine * np.sin(angle), sine]
    matrix = np.stack(slopes, axis=1)
    covariance = np.linalg.inv(matrix.T @ matrix) * sigma**2
    ideal = (covariance @ (matrix.T @ noise))[2] / sigma**2
    fit = fit_driven_fringe_si(2.0 + half * np.cos(phase) + noise, 1.0, [turn / (2 * np.pi)])
    (got,) = fit.phase_amplitude
    u = float(np.sqrt(covariance[2, 2]))
    assert float(got.u_magnitude) == pytest.approx(u, rel=0.06)
    assert float(got.magnitude) - depth == pytest.approx(ideal, abs=0.2 * u)


def test_a_run_goes_on_where_it_ended(tmp_path, monkeypatch, capsys):
    log = tmp_path / "fringe.log"
    known = statistics.fitted("deep", 3_000_000, 3000)
    monkeypatch.setattr(statistics, "SAMPLES", 3000)
    log.write_text(json.dumps(known) + "\n" + '{"kind": "de', encoding="utf-8")
    arguments = ["fringe_statistics", "--records", "1", "--seed", "3", "--only", "deep"]
    monkeypatch.setattr(sys, "argv", [*arguments, "--log", str(log)])
    monkeypatch.setattr(statistics, "fitted", None)  # nothing is left to fit
    with pytest.raises(SystemExit) as end:
        statistics.main()
    assert end.value.code == 0
    assert "deep                1" in capsys.readouterr().out


def test_a_limit_that_is_missed_is_said():
    record = {"kind": "deep", "seed": 0, "samples": 1, "depth": 3.0, "span": 2.0, "u": [0.01] * 3}
    record |= {"off": [0.08, 0.0, 0.0], "factor": 1.96, "reasons": []}
    (row,) = statistics.rows_of([record] * 100)
    assert statistics.verdict(row) == ["coverage 0.0%", "100 wrong minima"]


@pytest.mark.slow
@pytest.mark.parametrize("kind", statistics.KINDS)
def test_a_taste_at_the_acceptance_size(kind):
    assert statistics.verdict(run(kind, 24, statistics.SAMPLES)) == []


@pytest.mark.trials
@pytest.mark.parametrize("kind", statistics.KINDS)
def test_statistics_at_the_acceptance_size(kind):
    row = run(kind, 200 if kind in ("exact", "undetermined") else 2000, statistics.SAMPLES)
    print(row)
    assert statistics.verdict(row) == []
    assert np.all(np.abs(np.array(row["widths"]) - 1) < 0.1) or kind in ("exact", "undetermined")
