"""The drift rate against numpy's straight line, and its coverage in white and in coloured noise."""

import numpy as np
import pytest

from calibration.desk.drift import drift_of, lag_one


def test_rate_and_u_are_those_of_a_straight_line():
    rng = np.random.default_rng(4)
    t = np.sort(rng.uniform(0.0, 1e6, 40)) + 1.7e9
    u = rng.uniform(0.5, 2.0, 40)
    y = 30.0 + 2e-6 * (t - 1.7e9) + u * rng.standard_normal(40)
    drift = drift_of(t, y, u, "m/V")
    (slope, _), covariance = np.polyfit(t - 1.7e9, y, 1, w=1 / u, cov=True)
    assert drift.rate.unit == "m/V/s"
    assert drift.rate.magnitude == pytest.approx(slope, rel=1e-9)
    assert drift.rate.u_magnitude == pytest.approx(covariance[0, 0] ** 0.5, rel=1e-9)
    assert drift.rate.dof == 38
    assert drift.scatter == pytest.approx(1.0, abs=0.35)
    assert drift.relative_rate.magnitude == pytest.approx(slope / np.average(y, weights=u**-2))
    assert drift.per_day().magnitude == pytest.approx(86400 * drift.relative_rate.magnitude)


def coloured(rng, n, r):
    noise, left = rng.standard_normal(n), [0.0]
    for value in noise:
        left.append(r * left[-1] + value)
    return np.array(left[1:])


@pytest.mark.parametrize(("r", "least"), [(0.0, 0.92), (0.6, 0.90)])
def test_the_interval_covers(r, least):
    """Of 400 runs without drift zero lies inside 95 %, but for 3 σ of the count and the bias in r.

    In noise with r = 0.6 the plain interval would cover two thirds.
    """
    rng = np.random.default_rng(17)
    t = 3600.0 * np.arange(150)
    inside = [not drift_of(t, coloured(rng, 150, r) + 50.0, None, "1").is_significant
              for _ in range(400)]  # fmt: skip
    assert least < np.mean(inside) < 0.99


def test_the_autocorrelation_comes_without_its_bias():
    rng = np.random.default_rng(6)
    found = []
    for _ in range(300):
        series = coloured(rng, 60, 0.5)[10:]
        found.append(lag_one(series - series.mean()))
    assert np.mean(found) == pytest.approx(0.5, abs=0.03)


def test_too_few_results_or_one_moment_have_none():
    assert drift_of(np.arange(3.0), np.arange(3.0), None, "1") is None
    assert drift_of(np.zeros(9), np.arange(9.0), None, "1") is None
