"""The Allan deviation against published data sets, with gaps, and its u against simulation."""

import numpy as np
import pytest
from published import close, records

from calibration.desk.allan import allan_deviation, on_grid, overlapping_deviation


def thousand_points():
    record = records("allan")["allan.gen"]
    numbers = [record["value"][0]]
    while len(numbers) < 1000:
        numbers.append(16807 * numbers[-1] % 2147483647)
    assert numbers[:4] == record["value"]
    return np.array(numbers) / 2147483647


def test_the_thousand_points_give_the_handbook_s_deviations():
    values = thousand_points()
    found = [overlapping_deviation(values, m)[0] for m in (1, 10, 100)]
    assert found == close(records("allan")["allan.oadev"])


def test_the_nine_points_give_the_handbook_s_deviations():
    record = records("allan")["allan.nbs9"]
    values = np.array([892, 809, 823, 798, 671, 644, 883, 903, 677], dtype=float)
    found = [overlapping_deviation(values, m)[0] for m in (1, 2)]
    assert found == pytest.approx(record["value"][1], abs=record["tolerance"])


def test_a_large_mean_costs_no_digits():
    values = thousand_points()
    moved = overlapping_deviation(values + 1e6, 100)[0]
    assert moved == pytest.approx(overlapping_deviation(values, 100)[0], rel=1e-8)


def test_gaps_are_left_out_and_not_bridged():
    """Each pair of averages that is whole, by the definition, one by one."""
    values = thousand_points()[:60]
    values[[7, 8, 31]] = np.nan
    m = 3
    averages = np.array([values[k : k + m].mean() for k in range(60 - m + 1)])
    differences = averages[m:] - averages[:-m]
    whole = differences[np.isfinite(differences)]
    deviation, pairs = overlapping_deviation(values, m)
    assert pairs == len(whole)
    assert deviation == pytest.approx(np.sqrt(0.5 * np.mean(whole**2)), rel=1e-12)


def test_results_at_their_times_go_on_a_grid():
    times = np.array([0.0, 60.2, 119.9, 300.1, 359.8])
    step, grid = on_grid(times, np.arange(5.0))
    assert step == pytest.approx(60.0, abs=0.5)
    assert np.array_equal(grid, [0, 1, 2, np.nan, np.nan, 3, 4], equal_nan=True)


def test_white_noise_falls_with_the_square_root_and_its_u_holds():
    rng = np.random.default_rng(8)
    runs = [
        allan_deviation(60.0 * np.arange(512), 3.0 + 0.1 * rng.standard_normal(512), "V")
        for _ in range(300)
    ]
    deviations = np.array([run.deviation for run in runs])
    expected = 0.1 / np.sqrt(runs[0].tau_s / 60.0)
    # At the longest times few averages are left: rms over the runs is what the theory is about.
    assert np.sqrt((deviations**2).mean(axis=0)) == pytest.approx(expected, rel=0.1)
    told = np.mean([run.u for run in runs], axis=0)
    assert told == pytest.approx(deviations.std(axis=0), rel=0.3)


def test_a_drift_ends_the_gain_of_averaging():
    rng = np.random.default_rng(1)
    k = np.arange(2000)
    steady = allan_deviation(60.0 * k, rng.standard_normal(2000), "1")
    drifting = allan_deviation(60.0 * k, rng.standard_normal(2000) + 0.01 * k, "1")
    # White 1/√m meets drift 0.01·m/√2 at m = 27: the least is near there, within a factor of two.
    assert 60 * 13 < drifting.tau_s[drifting.best] < 60 * 55
    assert steady.tau_s[steady.best] > 60 * 100
    assert not drifting.is_still_falling


def test_too_few_results_have_none():
    assert allan_deviation(np.arange(7.0), np.arange(7.0), "1") is None
