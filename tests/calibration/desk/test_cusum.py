"""Cumulative sums and the standardised results they add up, against tables and simulation."""

import math

import numpy as np
import pytest
from published import close, published, records
from scipy import stats

from calibration.desk.cusum import Cusum, CusumRule, average_run_length
from calibration.desk.self_starting import SelfStarting


@published("control_chart", "cusum.arl")
def test_run_lengths_are_the_table_s(record):
    found = [average_run_length(0.5, record["h"], shift) for shift in record["shifts"]]
    assert found == close(record)


def test_sums_are_the_handbook_s():
    record = records("control_chart")["cusum.example"]
    sums, upper, lower, alarms = Cusum(CusumRule(0.3175, 4.1959)), [], [], []
    for value in record["data"]:
        alarms.append(sums.add(value - 325.0))
        upper.append(sums.high)
        lower.append(sums.low)
    assert upper == close(record)
    assert lower == close(record | {"value": record["lower"]})
    assert alarms.index(1) == 13  # group 14
    # N+ counts from group 13 on: two results, and the shift is k + C+/N+.
    again = Cusum(CusumRule(0.3175, 4.1959))
    for value in record["data"][:14]:
        side = again.add(value - 325.0)
    assert again.run(side) == 2
    assert again.shift(side) == pytest.approx(0.3175 + 4.94 / 2, abs=0.005)


@pytest.mark.parametrize("run_length", [370.0, 1e5, 1e9])
def test_a_rule_for_a_run_length_has_it(run_length):
    """Siegmund's approximation (Sequential Analysis, 1985; as Montgomery, 9.1.4) is a few percent off."""
    rule = CusumRule.for_run_length(run_length)
    assert rule.run_length == pytest.approx(run_length, rel=1e-3)
    b = rule.h + 1.166
    one_sided = (math.exp(2 * rule.k * b) - 2 * rule.k * b - 1) / (2 * rule.k**2)
    assert one_sided / 2 == pytest.approx(run_length, rel=0.05)


def test_h_for_370_results_is_the_table_s():
    """Hawkins 1993, as Montgomery's table 9.4 has it (from memory): k 0.5, h 4.77 for 370."""
    assert CusumRule.for_run_length(370.0).h == pytest.approx(4.77, abs=0.006)


def scores(values, regressors=None, **more):
    state = SelfStarting(0 if regressors is None else 1)
    rows = [()] * len(values) if regressors is None else [(r,) for r in regressors]
    found = [state.add(v, row, **more) for v, row in zip(values, rows, strict=True)]
    return np.array([z for z in found if z is not None])


@pytest.mark.parametrize("is_regressed", [False, True])
def test_scores_of_a_steady_process_are_normal_and_independent(is_regressed):
    rng = np.random.default_rng(11)
    every = []
    for _ in range(300):
        noise = 3e-4 * rng.standard_normal(40)
        t = np.sin(np.arange(40) / 4.0) if is_regressed else None
        every.append(scores(noise + (0.02 * t if is_regressed else 0.0), t))
    assert len(every[0]) == (40 - 3 if is_regressed else 40 - 2)
    pooled = np.concatenate(every)
    assert stats.kstest(pooled, "norm").pvalue > 0.01
    neighbours = [np.corrcoef(z[:-1], z[1:])[0, 1] for z in every]
    assert np.mean(neighbours) == pytest.approx(0.0, abs=0.05)
    early = np.array([z[:3] for z in every]).ravel()
    assert stats.kstest(early, "norm").pvalue > 0.01


def test_a_score_keeps_its_digits_far_out():
    """Against scipy: 20 standard deviations after 5000 results."""
    rng = np.random.default_rng(3)
    values = rng.standard_normal(5000)
    state = SelfStarting()
    for value in values:
        state.add(float(value))
    t = 20.0 / (values.std(ddof=1) * math.sqrt(1 + 1 / 5000))
    expected = stats.norm.isf(stats.t.sf(t, 4999))
    assert state.add(float(values.mean() + 20.0)) == pytest.approx(expected, rel=1e-6)


def test_what_else_is_uncertain_makes_a_score_smaller():
    values = [0.0, 1.0, -1.0, 0.5, -0.5, 0.2, 5.0]
    plain, wider = scores(values)[-1], scores(values, variance=4.0)[-1]
    assert 0 < wider < plain
