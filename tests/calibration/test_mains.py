"""The mains taken out of a scan: exactly what was added, and nothing where there is none."""

import numpy as np
import pytest

from calibration.mains import without_mains

RATE_HZ = 4000.0
TIME_S = np.arange(int(8 * RATE_HZ)) / RATE_HZ
RNG = np.random.default_rng(3)
PHASE = 5 * np.pi * np.abs((TIME_S / 2) % 2 - 1)  # a triangle over 2.5 fringes
SCAN = 2.0 + 1.9 * np.cos(PHASE + 0.4) + 2e-4 * RNG.normal(size=TIME_S.size)


def hum(mains_hz, size_v):
    turn = 2 * np.pi * mains_hz * TIME_S
    return size_v * (np.cos(turn + 0.7) + 0.4 * np.cos(2 * turn) + 0.2 * np.cos(3 * turn - 1.0))


@pytest.mark.parametrize("mains_hz", [50.0, 60.0])
def test_the_mains_that_was_added_is_taken_off(mains_hz):
    clean = without_mains(SCAN + hum(mains_hz, 0.02), RATE_HZ, mains_hz)
    # what the sweep itself has at these frequencies stays in the difference: parts in 1e4
    assert np.abs(clean - SCAN).max() < 1e-3
    assert np.abs(hum(mains_hz, 0.02)).max() > 0.02


def test_gaps_stay_where_they_are():
    gappy = SCAN + hum(50.0, 0.02)
    gappy[1000:1100] = np.nan
    clean = without_mains(gappy, RATE_HZ, 50.0)
    assert np.isnan(clean[1000:1100]).all()
    assert np.nanmax(np.abs(clean - SCAN)) < 1e-3


def test_a_scan_without_mains_hardly_changes():
    assert np.abs(without_mains(SCAN, RATE_HZ, 50.0) - SCAN).max() < 1e-3


def test_a_sweep_at_the_mains_frequency_is_no_mains():
    """Fifty fringes a second: the sweep itself is the line at 50 Hz and must stay."""
    fast = 2.0 + 1.9 * np.cos(2 * np.pi * 50.0 * TIME_S)
    np.testing.assert_allclose(without_mains(fast, RATE_HZ, 50.0), fast, atol=1e-9)


def test_what_is_too_short_or_empty_comes_back_as_it_was():
    for short in (SCAN[:20], np.full(100, np.nan)):
        np.testing.assert_array_equal(without_mains(short, RATE_HZ, 50.0), short)
