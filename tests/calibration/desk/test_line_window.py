"""Blocks gathered into stretches: in place, through gaps, in whatever pieces they come."""

import numpy as np
import pytest

from calibration.desk import line_window
from calibration.desk.line_window import LineWindow
from firmware_bridge.live_events import LiveBlock


def block(start, n, host_time=0.0, **more):
    values = np.stack([np.arange(start, start + n), -np.arange(start, start + n)], axis=1)
    return LiveBlock(start, values.astype(float), host_time=host_time, **more)


@pytest.mark.parametrize("size", [1, 7, 100, 1000])
def test_stretches_are_the_last_of_each_period(size):
    window = LineWindow([1], every=100, over=40)
    done = [s for k in range(0, 1000, size) for s in window.add(block(500 + k, size, k + size))]
    assert len(done) == 10
    for number, stretch in enumerate(done):
        end = 500 + 100 * (number + 1)
        assert np.array_equal(stretch.values[:, 0], -np.arange(end - 40.0, end))
    assert done[3].ended_unix_s == -(-400 // size) * size


def test_a_gap_is_missing_in_its_place():
    window = LineWindow([0], every=50, over=50)
    assert window.add(block(0, 20)) == []
    (stretch,) = window.add(block(30, 25))
    values = stretch.values[:, 0]
    assert np.isnan(values[20:30]).all()
    assert np.array_equal(values[30:], np.arange(30.0, 50.0))
    (following,) = window.add(block(55, 45))
    assert np.array_equal(following.values[:, 0], np.arange(50.0, 100.0))


def test_a_stretch_with_little_in_it_is_none_and_a_long_gap_is_passed_over():
    window = LineWindow([0], every=50, over=50)
    window.add(block(0, 20))
    assert window.add(block(1_000_010, 20)) == []
    (stretch,) = window.add(block(1_000_030, 20))
    assert np.array_equal(stretch.values[10:, 0], np.arange(1_000_010.0, 1_000_050.0))


def test_what_comes_late_is_put_in_its_place_or_left_out():
    window = LineWindow([0], every=50, over=50)
    window.add(block(0, 20))
    window.add(block(30, 15))
    window.add(block(20, 10))
    (stretch,) = window.add(block(45, 10))
    assert np.array_equal(stretch.values[:, 0], np.arange(50.0))
    assert window.add(block(40, 5)) == []  # of the stretch before
    (following,) = window.add(block(55, 45))
    assert np.array_equal(following.values[:, 0], np.arange(50.0, 100.0))


def test_over_range_values_are_counted():
    window = LineWindow([0], every=20, over=20)
    hit = block(0, 20, over_range=3)
    hit.values[[2, 5], 0] = np.nan
    hit.values[7, 1] = np.nan  # of a channel that is not asked for
    (stretch,) = window.add(hit)
    assert stretch.over_range == 2


def test_memory_is_bounded(monkeypatch):
    monkeypatch.setattr(line_window, "MOST_SAMPLES", 30)
    window = LineWindow([0], every=100, over=100)
    (stretch,) = window.add(block(0, 100))
    assert np.array_equal(stretch.values[:, 0], np.arange(70.0, 100.0))
