"""Charts of simulated months: alarms where a line has shifted, silence where it has not."""

from dataclasses import replace

import numpy as np
import pytest
from ledgers import LINE_HZ, month, result

from calibration.desk.cusum import CusumRule
from calibration.desk.ledger_errors import LedgerError
from calibration.desk.line_alarms import alarms_in
from calibration.desk.line_chart import RUN_LENGTH, chart_line
from calibration.desk.temperature_law import TemperatureLaw, fitted_coefficient, parse_law
from calibration.desk.utc import unix_of
from metro.errors import MetroError

RULE = CusumRule.for_run_length(RUN_LENGTH)
NO_LAW = TemperatureLaw()
STEP_HOUR = 480  # the 20th day is over
PER_KELVIN = -120e-6


def hours_of(entries, alarms):
    first = entries[0].unix_s
    return [(unix_of(alarm.time) - first) / 3600 for alarm in alarms]


def test_a_step_of_4_sigma_is_told_within_a_day_and_nothing_before():
    early, delays = 0, []
    for seed in range(20):
        entries = month(seed, step=4.0, at=STEP_HOUR)
        hours = hours_of(entries, alarms_in(entries, NO_LAW, RULE))
        early += any(hour < STEP_HOUR for hour in hours)
        delays.append(min(hour for hour in hours if hour >= STEP_HOUR) - STEP_HOUR)
    assert early <= 1
    assert max(delays) < 24
    assert np.median(delays) <= 4


@pytest.mark.trials
def test_false_alarms_come_as_seldom_as_said():
    """2000 steady months of 720 hours: 14.4 alarms expected at one in 100 000; Poisson, 4 σ."""
    count = sum(len(alarms_in(month(seed), NO_LAW, RULE)) for seed in range(2000))
    assert count == pytest.approx(2000 * 720 / RUN_LENGTH, abs=4 * (2000 * 720 / RUN_LENGTH) ** 0.5)


@pytest.mark.parametrize(
    "law", [TemperatureLaw(PER_KELVIN, 10e-6, is_used=True), TemperatureLaw(is_fitted=True, is_used=True)]
)  # fmt: skip
def test_a_daily_swing_of_5_kelvin_raises_no_alarm_once_corrected(law):
    """The swing is 0.6 of the scatter either way: ±300 ppm against 500 ppm."""
    for seed in range(20):
        entries = month(seed, swing_k=5.0, per_kelvin=PER_KELVIN, scatter=5e-4)
        assert alarms_in(entries, law, RULE) == []


def test_the_same_swing_uncorrected_hides_or_alarms_and_the_chart_says_so():
    entries = month(1, swing_k=5.0, per_kelvin=20 * PER_KELVIN, scatter=5e-4)
    chart = chart_line(entries)
    assert any("not corrected" in caution for caution in chart.cautions)
    assert any("hang together" in caution for caution in chart.cautions)


def test_a_step_is_found_under_the_swing_too():
    law = TemperatureLaw(PER_KELVIN, 10e-6, is_used=True)
    entries = month(3, step=4.0, swing_k=5.0, per_kelvin=PER_KELVIN)
    (alarm,) = alarms_in(entries, law, RULE)
    (hour,) = hours_of(entries, [alarm])
    assert STEP_HOUR <= hour < STEP_HOUR + 24
    assert abs((unix_of(alarm.since) - entries[0].unix_s) / 3600 - STEP_HOUR) <= 2
    assert alarm.sigma == pytest.approx(4.0, abs=0.7)
    assert alarm.shift.magnitude == pytest.approx(4e-3 * 33.3e-9, rel=0.25)
    assert alarm.shift.unit == "m/V"
    assert str(alarm).startswith("line at 87.1 Hz has shifted by about 1")


def test_a_slow_drift_is_told_in_the_end():
    entries = month(5)
    drifting = [
        replace(e, value=type(e.value).of(e.value.magnitude * (1 + 1e-5 * k), "m/V", e.value.u_magnitude))
        for k, e in enumerate(entries)
    ]  # fmt: skip
    chart = chart_line(drifting)
    assert chart.alarms
    assert chart.drift.is_significant
    assert chart.drift.per_day().magnitude == pytest.approx(24e-5, rel=0.05)


def test_one_wild_result_is_no_lasting_shift():
    entries = month(7, hours=200)
    wild = entries[150]
    entries[150] = replace(wild, value=type(wild.value).of(66e-9, "m/V", 1e-12))
    assert alarms_in(entries, NO_LAW, RULE) == []


def test_a_chart_holds_all_that_is_said_about_a_line():
    chart = chart_line(month(2), baseline=200)
    assert chart.line_hz == LINE_HZ
    assert chart.limits.baseline == 200
    assert chart.limits.sigma == pytest.approx(33.3e-12, rel=0.15)
    assert chart.limits.low < 33.3e-9 < chart.limits.high
    assert chart.sums.shape == (720, 2)
    assert chart.allan.deviation[0] == pytest.approx(33.3e-12, rel=0.1)
    assert not chart.drift.is_significant
    document = chart.to_dict()
    assert document["cusum"]["results_between_false_alarms"] == pytest.approx(1e5, rel=1e-3)
    assert chart_line(month(2), sample=24).limits.kind == "means and standard deviations"


def test_distrusted_results_are_left_out():
    entries = month(2, hours=50)
    entries[10] = replace(entries[10], reasons=("clipped",))
    chart = chart_line(entries)
    assert len(chart.values) == 49
    assert chart.cautions[0].startswith("1 results were left out")
    with pytest.raises(LedgerError, match=r"^of 1 results none is trustworthy"):
        chart_line([entries[10]])


def test_results_in_two_units_are_no_row():
    with pytest.raises(LedgerError, match="are not alike: ratio in 1, ratio in m/V"):
        chart_line([result(1.0, unit="1"), result(33e-9)])


def test_the_coefficient_that_results_show_covers_the_true_one():
    pulls = []
    for seed in range(60):
        entries = month(seed, swing_k=5.0, per_kelvin=PER_KELVIN, scatter=5e-4, hours=240)
        law = fitted_coefficient(entries)
        pulls.append((law.coefficient - PER_KELVIN) / law.u)
    assert np.std(pulls) == pytest.approx(1.0, abs=0.3)
    assert np.mean(pulls) == pytest.approx(0.0, abs=0.45)


def test_a_coefficient_needs_temperatures_that_differ():
    with pytest.raises(LedgerError, match="at least 8 results with a temperature, got 5"):
        fitted_coefficient(month(1, hours=5))
    with pytest.raises(LedgerError, match=r"at least 0\.05 K apart, got 0 K"):
        fitted_coefficient(month(1, hours=50))


def test_the_law_is_read_from_options():
    assert parse_law(None, None) == NO_LAW
    law = parse_law("-120 ppm/K", "10 ppm/K")
    assert (law.coefficient, law.u) == pytest.approx((-120e-6, 10e-6))
    assert law.corrected(1.0, 295.15, 293.15) == pytest.approx(1 / (1 - 240e-6))
    assert parse_law("fit", None).is_fitted
    with pytest.raises(LedgerError, match="goes with --temperature-coefficient VALUE"):
        parse_law("fit", "1 ppm/K")
    with pytest.raises(MetroError, match="--temperature-coefficient"):
        parse_law("3 mm", None)
