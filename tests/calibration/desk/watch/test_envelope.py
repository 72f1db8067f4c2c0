"""The envelope on a live page, against the samples themselves."""

import numpy as np
import pytest

from calibration.desk.watch.envelope import Envelope


def fed(envelope, values, rng, missing=()):
    """Feed values in blocks of random length, without the stretches that are missing."""
    start = 0
    while start < values.size:
        stop = min(values.size, start + int(rng.integers(1, 700)))
        for a, b in missing:
            if a <= start < b:
                start = b
            elif start < a < stop:
                stop = a
        envelope.add(start, values[start:stop])
        start = stop


@pytest.mark.parametrize("rate_hz", [8.0, 1000.0, 50_000.0])
def test_lowest_and_highest_of_every_bin(rate_hz):
    rng = np.random.default_rng(3)
    values = rng.normal(size=int(rate_hz * 2.37))
    envelope = Envelope(rate_hz, 1.0, bins=100)
    fed(envelope, values, rng)
    view = envelope.view()
    size = max(1, round(rate_hz / 100))
    numbers = np.arange(values.size) // size
    newest = numbers[-1]
    for place, number in enumerate(range(newest - view.low.size + 1, newest + 1)):
        inside = values[numbers == number]
        assert view.low[place] == inside.min()
        assert view.high[place] == inside.max()
    assert not view.lost.any()
    # 0 is the moment after the newest sample, so that the whole window lies before it.
    assert view.time_s[0] == pytest.approx(-1.0, abs=2.0 * size / rate_hz)
    assert -size / rate_hz < view.time_s[-1] < size / rate_hz


def test_missing_and_over_range_samples_show_in_their_bins():
    values = np.arange(1000.0)
    values[205] = np.nan  # over-range
    envelope = Envelope(1000.0, 1.0, bins=100)
    fed(envelope, values, np.random.default_rng(1), missing=[(500, 530)])
    view = envelope.view()
    assert np.flatnonzero(view.lost).tolist() == [20, 50, 51, 52]
    assert (view.low[20], view.high[20]) == (200.0, 209.0)
    assert np.isnan(view.low[[50, 51, 52]]).all()


def test_a_gap_longer_than_the_window_leaves_nothing_of_before():
    envelope = Envelope(1000.0, 1.0, bins=100)
    envelope.add(0, np.full(1000, 7.0))
    envelope.add(50_000, np.full(10, 1.0))
    view = envelope.view()
    assert view.low[-1] == 1.0
    assert np.isnan(view.low[:-1]).all()
    assert view.lost[:-1].all()


def test_a_block_longer_than_the_window_leaves_its_end():
    envelope = Envelope(1000.0, 1.0, bins=100)
    envelope.add(3, np.arange(5003.0))
    view = envelope.view()
    assert view.high[-1] == 5002.0
    assert view.low.size == 100
    assert not view.lost.any()


def test_indices_that_begin_anew_empty_it():
    envelope = Envelope(1000.0, 1.0, bins=100)
    envelope.add(5000, np.full(400, 3.0))
    envelope.add(0, np.full(20, 1.0))
    view = envelope.view()
    assert view.high.tolist() == [1.0, 1.0]


def test_before_the_first_sample_there_is_nothing():
    view = Envelope(1000.0, 1.0).view()
    assert view.time_s.size == view.low.size == view.lost.size == 0
