"""Line results while a recording runs: into the ledger, judged, and on through what may fail."""

import logging
import time
from dataclasses import replace

import numpy as np
import pytest
from ledgers import LINE_HZ, START_S, result, sample_calibration

from calibration.desk.calibration_entry import CalibrationEntry
from calibration.desk.cusum import CusumRule
from calibration.desk.ledger import Ledger
from calibration.desk.ledger_errors import LedgerFailedError
from calibration.desk.line_log import LineLog, LogPlan
from calibration.desk.line_window import Stretch
from calibration.desk.logged_channels import LoggedChannels
from calibration.desk.measured_lines import Measuring
from calibration.desk.temperature_law import TemperatureLaw

RATE_HZ = 2000.0
CHANNELS = LoggedChannels(RATE_HZ, 0, "V", 1, 2, 273.15)
PLAN = LogPlan(
    Measuring((LINE_HZ,)), False, "bench", TemperatureLaw(), CusumRule(0.5, 8.0), "test port"
)


@pytest.fixture(autouse=True)
def heard(caplog):
    """Hear what is logged, whatever a command before has set."""
    caplog.set_level(logging.WARNING, "calibration.desk")


@pytest.fixture
def ledger(tmp_path):
    with Ledger(str(tmp_path / "bench.ledger")) as opened:
        yield opened


def stretch(number, ratio=0.3, *, drive_v=1.0, seconds=1):
    """Return a stretch with the line at a ratio to the drive, at 21.5 °C."""
    rng = np.random.default_rng(number)
    t = np.arange(int(seconds * RATE_HZ)) / RATE_HZ
    line = np.cos(2 * np.pi * LINE_HZ * t + 0.4)
    columns = [
        ratio * line + 0.01 * rng.standard_normal(len(t)),
        drive_v * line + (1e-4 * rng.standard_normal(len(t)) if drive_v else 0.0),
        np.full(len(t), 21.5),
    ]
    return Stretch(np.stack(columns, axis=1), 0, START_S + 60.0 * number)


def test_results_are_those_of_the_stretch(ledger):
    log = LineLog(ledger, PLAN)
    log.put(stretch(0), CHANNELS)
    log.close()
    (entry,) = ledger.line_results()
    assert log.results == 1
    assert (entry.line_hz, entry.bench, entry.source) == (LINE_HZ, "bench", "test port")
    assert entry.is_ratio
    assert entry.value.unit == "1"
    # u = 0.01·√(2/2000) = 0.32 mV/V: five of it.
    assert entry.value.magnitude == pytest.approx(0.3, abs=1.6e-3)
    assert entry.value.u_magnitude == pytest.approx(3.2e-4, rel=0.3)
    assert entry.temperature_k == pytest.approx(294.65)
    assert entry.unix_s == pytest.approx(START_S - 0.5, abs=1e-3)
    assert entry.duration_s == 1.0
    assert entry.is_trustworthy


def put_all(log, stretches):
    for item in stretches:
        while log._queue.full():
            time.sleep(0.001)
        log.put(item, CHANNELS)
    log.close()


@pytest.mark.slow
def test_a_step_raises_one_alarm_with_a_log_line(ledger, caplog):
    told = []
    log = LineLog(ledger, PLAN, told.append)
    with caplog.at_level(logging.INFO, "calibration.desk"):
        put_all(log, (stretch(k, 0.3 if k < 30 else 0.302) for k in range(45)))
    (alarm,) = log.alarms
    assert told == [alarm]
    assert alarm.shift.magnitude == pytest.approx(0.002, rel=0.5)
    assert ledger.line_results()[30].time <= alarm.time <= ledger.line_results()[36].time
    warnings = [r.getMessage() for r in caplog.records if r.levelno == logging.WARNING]
    assert warnings == [f"alarm: {alarm}"]
    assert "87.1 Hz: 0.2" in caplog.text
    assert "\n" not in warnings[0]


@pytest.mark.slow
def test_after_a_restart_the_results_before_count(ledger):
    put_all(LineLog(ledger, PLAN), (stretch(k, 0.3) for k in range(30)))
    again = LineLog(ledger, PLAN)
    put_all(again, (stretch(k, 0.303) for k in range(30, 36)))
    assert len(again.alarms) == 1


def test_results_wait_for_a_ledger_that_fails(ledger, monkeypatch, caplog):
    real, calls = ledger.add_line_results, []

    def failing(entries):
        calls.append(len(list(entries)))
        if len(calls) < 3:
            raise LedgerFailedError("the ledger failed: the disk is full")
        return real(entries)

    log = LineLog(ledger, PLAN)
    monkeypatch.setattr(ledger, "add_line_results", failing)
    put_all(log, (stretch(k) for k in range(4)))
    assert calls == [1, 2, 3, 1]
    assert len(ledger.line_results()) == log.results == 4
    assert [r.getMessage() for r in caplog.records] == [
        "the ledger failed: the disk is full; results wait",
        "the ledger is back; 3 results had waited",
    ]


def test_a_stretch_that_cannot_be_fitted_is_told_and_the_log_goes_on(ledger, caplog):
    log = LineLog(ledger, PLAN)
    put_all(log, [stretch(0, drive_v=0.0), stretch(1, seconds=0.001), stretch(2)])
    assert log.results == 1
    assert [r.getMessage() for r in caplog.records] == [
        "no line result: the drive holds no line at 87.1 Hz",
        "no line result: samples must have at least 16 values, got 2",
    ]


def test_a_log_that_falls_behind_leaves_results_out_and_never_waits(ledger, monkeypatch, caplog):
    log = LineLog(ledger, PLAN)
    monkeypatch.setattr(log, "_take", lambda *_: time.sleep(0.2))
    begun_s = time.monotonic()
    for k in range(5):
        log.put(stretch(k), CHANNELS)
    assert time.monotonic() - begun_s < 0.2
    log.close()
    assert "a line result is left out" in caplog.text


def test_a_new_calibration_is_taken_while_logging(ledger, tmp_path, calibrated_stretch, caplog):
    entry, samples, expected = calibrated_stretch
    ledger.add_calibration(entry)
    measuring = Measuring((LINE_HZ,), entry.calibration, "rising")
    log = LineLog(ledger, replace(PLAN, measuring=measuring, is_metres=True))
    log.put(samples, CHANNELS)
    while log.results < 1:
        time.sleep(0.01)
    text = entry.text.replace(entry.calibration.created, "2031-01-01T00:00:00+00:00")
    (tmp_path / "new.json").write_text(text, encoding="utf-8")
    ledger.add_calibration(CalibrationEntry.of_file(tmp_path / "new.json"))
    log.put(samples, CHANNELS)
    log.close()
    first, second = ledger.line_results()
    assert first.value.unit == second.value.unit == "m/V"
    assert first.value.magnitude == pytest.approx(expected, rel=2e-3)
    assert "the calibration of 2031-01-01T00:00:00.000000+00:00 is in force now" in caplog.text


@pytest.fixture
def calibrated_stretch(tmp_path):
    """Return the sample's calibration, a stretch on its rising slope, and metres per volt in it."""
    entry = sample_calibration(tmp_path)
    extremes, chain = entry.calibration.extremes, entry.calibration.chain
    t = np.arange(4000) / RATE_HZ
    drive = 0.02 * np.cos(2 * np.pi * LINE_HZ * t)
    per_volt = 330e-9
    phase = -np.pi / 2 + 4 * np.pi * chain["index"].magnitude / chain["wavelength"].magnitude * (
        per_volt * drive
    )
    volts = extremes.mid_v + extremes.swing_v * np.cos(phase)
    noise = 1e-3 * np.random.default_rng(1).standard_normal(4000)
    columns = np.stack([volts + noise, drive, np.full(4000, 21.0)], axis=1)
    return entry, Stretch(columns, 0, START_S), per_volt


def test_the_history_of_other_lines_does_not_matter(ledger):
    ledger.add_line_results(
        [replace(result(1.0, unit="1", unix_s=START_S + k), line_hz=50.0) for k in range(20)]
    )
    log = LineLog(ledger, PLAN)
    put_all(log, [stretch(0)])
    assert log.results == 1
    assert log.alarms == []


def test_results_that_the_ledger_never_took_are_told(ledger, monkeypatch):
    def failing(_entries):
        raise LedgerFailedError("the ledger failed: the disk is full")

    log = LineLog(ledger, PLAN)
    monkeypatch.setattr(ledger, "add_line_results", failing)
    put_all(log, [stretch(0), stretch(1)])
    assert log.reasons == ["2 line results are lost: the ledger failed to the end"]


def test_what_is_unforeseen_is_told_and_the_log_goes_on(ledger, monkeypatch, caplog):
    log = LineLog(ledger, PLAN)
    real, calls = log._entries, []

    def odd(*arguments):
        calls.append(arguments)
        if len(calls) == 1:
            raise ZeroDivisionError("odd")
        return real(*arguments)

    monkeypatch.setattr(log, "_entries", odd)
    put_all(log, [stretch(0), stretch(1)])
    assert log.results == 1
    assert log.reasons == ["line results are missing: odd"]
    assert "no line result: odd" in caplog.text
