"""Scans that lean with the drive: brought to the fringe at one drive, and left alone without a lean."""

import numpy as np
import pytest

from calibration.scan_tilt import level_scan

RATE_HZ = 4000.0
TIME_S = np.arange(int(8 * RATE_HZ)) / RATE_HZ
DRIVE_V = 2.4 * (4 * np.abs((TIME_S / 4 + 0.75) % 1.0 - 0.5) - 1.0)
SWEEP_RAD = 5 * np.pi * DRIVE_V / 2.4 + 0.6


def scan(tilt, seed=1):
    """Two beams, one of them growing by ``tilt`` from end to end: the law of interference itself."""
    moved = 1.0 + tilt * DRIVE_V / 4.8
    light = 1.0 + moved + 2 * 0.95 * np.sqrt(moved) * np.cos(SWEEP_RAD)
    return light + 2e-4 * np.random.default_rng(seed).normal(size=TIME_S.size)


@pytest.mark.parametrize("tilt", [0.02, -0.1, 0.5])
@pytest.mark.parametrize("at_v", [0.0, 0.3])
def test_a_leaning_fringe_is_levelled(tilt, at_v):
    levelled, lean = level_scan(scan(tilt), DRIVE_V, at_v)
    assert lean is not None
    moved = 1.0 + tilt * at_v / 4.8
    swing = 2 * 0.95 * np.sqrt(moved)
    clean = 1.0 + moved + swing * np.cos(SWEEP_RAD)
    # what a straight line leaves of the root: an eighth of the square of half the tilt
    left = (abs(tilt) / 2) ** 2 / 8 * swing + 0.002
    assert np.abs(levelled - clean).max() < 1.5 * left + 1e-3
    assert np.abs(scan(tilt) - clean).max() > 3 * np.abs(levelled - clean).max()


def test_a_scan_that_does_not_lean_is_left_alone():
    """20 seeds at 99.9 % for each of two slopes: one in 25 such runs would see one by chance."""
    seen = [level_scan(scan(0.0, seed), DRIVE_V)[1] for seed in range(20)]
    assert sum(lean is not None for lean in seen) <= 1


def test_gaps_stay_and_few_passes_are_not_followed():
    gappy = scan(0.1)
    gappy[5000:5100] = np.nan
    levelled, lean = level_scan(gappy, DRIVE_V)
    assert lean is not None
    assert np.isnan(levelled[5000:5100]).all()
    short = slice(0, int(0.7 * RATE_HZ))
    assert level_scan(scan(0.1)[short], DRIVE_V[short])[1] is None
    assert level_scan(np.full(500, np.nan), np.zeros(500))[1] is None
    assert level_scan(scan(0.1), np.zeros(TIME_S.size))[1] is None
