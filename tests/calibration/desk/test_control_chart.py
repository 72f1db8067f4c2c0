"""Control limits, their constants and run rules against a handbook's tables and examples."""

import numpy as np
import pytest
from published import close, published, records

from calibration.desk import chart_constants
from calibration.desk.control_chart import individual_limits, sample_limits, samples_of
from calibration.desk.ledger_errors import LedgerError
from calibration.desk.run_rules import run_rules

FUNCTIONS = {
    "d2": chart_constants.d2,
    "d3": chart_constants.d3,
    "c4": chart_constants.c4,
    "A2": chart_constants.a2,
    "D3": chart_constants.lower_range_factor,
    "D4": chart_constants.d4_factor,
    "A3": chart_constants.a3,
    "B3": chart_constants.b3,
    "B4": chart_constants.b4,
}


@published("control_chart", "constants.")
def test_constants_are_the_handbook_s(record):
    function = FUNCTIONS[record["id"].removeprefix("constants.")]
    assert [function(n) for n in range(2, 11)] == close(record)


def test_individual_limits_of_the_handbook_s_example():
    record = records("control_chart")["individuals.flow"]
    limits = individual_limits(np.array(record["data"]))
    assert [limits.centre, limits.spread_centre, limits.low, limits.high] == close(record)


@pytest.mark.parametrize("sample", [4, 16])
def test_limits_of_samples_hold_all_but_3_in_1000_means(sample):
    """Normal values of width one: 3-sigma limits hold 99.73 %; the baseline gives σ to a percent."""
    values = np.random.default_rng(5).standard_normal(sample * 4000) + 7.0
    limits = sample_limits(values, sample)
    assert limits.kind == ("means and ranges" if sample == 4 else "means and standard deviations")
    assert limits.sigma == pytest.approx(1.0, rel=0.02)
    assert limits.high - limits.centre == pytest.approx(3.0 / sample**0.5, rel=0.02)
    means = samples_of(values, sample).mean(axis=1)
    outside = np.mean((means < limits.low) | (means > limits.high))
    assert outside == pytest.approx(0.0027, abs=3 * (0.0027 / 4000) ** 0.5)


def test_too_few_results_give_no_limits():
    with pytest.raises(LedgerError, match=r"^control limits need at least 8 results, got 7$"):
        individual_limits(np.arange(7.0))


def rules_of(points):
    return [(hit.rule, hit.point) for hit in run_rules(np.array(points), 0.0, 1.0)]


def test_each_run_rule_is_met_where_its_pattern_is_complete():
    assert rules_of([0.1, -3.2, 0.1]) == [("one beyond 3 sigma", 1)]
    assert rules_of([2.1, -0.1, 2.2]) == [("two of three beyond 2 sigma on one side", 2)]
    assert rules_of([2.1, -0.1, -2.2]) == []
    assert rules_of([-1.1, -1.2, 0.5, -1.3, -1.1]) == [
        ("four of five beyond 1 sigma on one side", 4)
    ]
    assert rules_of([0.1, 0.2, 0.1, 0.3, 0.2, 0.4, 0.1, 0.2, -0.1]) == [
        ("eight in a row on one side", 7)
    ]
    assert rules_of([-0.5, -0.4, -0.2, 0.1, 0.2, 0.3]) == [("six in a row steadily up or down", 5)]
    assert rules_of([0.1, -0.1] * 7) == [("fourteen in a row up and down in turn", 13)]


def test_the_four_rules_call_chance_odd_once_in_about_91_points():
    """Champ and Woodall 1987 (from memory): the four Western Electric rules together, 91.75 points.

    A pattern that goes on counts once here, so that hits are a little rarer.
    """
    points = np.random.default_rng(2).standard_normal(200_000)
    hits = [hit for hit in run_rules(points, 0.0, 1.0) if "six" not in hit.rule]
    hits = [hit for hit in hits if "fourteen" not in hit.rule]
    assert len(points) / len({hit.point for hit in hits}) == pytest.approx(91.75, rel=0.25)
