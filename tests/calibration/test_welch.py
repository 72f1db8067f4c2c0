"""Spectral densities: against scipy's, gaps left out, pieces of any size alike."""

import numpy as np
import pytest

from calibration.welch import WelchSum, hann

RATE = 5000.0


def _density(values, segment, pieces=1, rate=RATE):
    total = WelchSum(segment, rate)
    for piece in np.array_split(values, pieces):
        total.add(piece)
    return total.result()


def _samples(n, seed=1):
    rng = np.random.default_rng(seed)
    t = np.arange(n) / RATE
    return 3.0 + np.cumsum(0.01 * rng.standard_normal(n)) + np.cos(2 * np.pi * 307.3 * t)


@pytest.mark.parametrize("pieces", [1, 2, 7, 100, 999])
@pytest.mark.parametrize("segment", [256, 1000, 4096])
def test_it_is_that_of_scipy(segment, pieces):
    signal = pytest.importorskip("scipy.signal")
    values = _samples(20_123)
    frequency, power = signal.welch(values, RATE, "hann", segment, detrend="constant")
    found = _density(values, segment, pieces)
    np.testing.assert_allclose(found.frequency_hz, frequency, rtol=1e-12)
    # Relative to each bin, but where the mean was taken out nothing but rounding may be left.
    np.testing.assert_allclose(found.power, power, rtol=1e-10, atol=1e-14 * power.max())
    assert found.segments == (len(values) - segment) // (segment // 2) + 1
    assert found.used == (found.segments + 1) * segment // 2
    window = signal.get_window("hann", segment)
    np.testing.assert_allclose(hann(segment), window, atol=1e-15)
    # Harris, Proc. IEEE 66 (1978) 51, table 1 (from memory): 1.50 bins for Hann.
    assert found.noise_bandwidth_hz == pytest.approx(1.5 * RATE / segment, rel=1e-9)


@pytest.mark.parametrize("pieces", [1, 5, 40])
def test_gaps_are_left_out_and_not_bridged(pieces):
    signal = pytest.importorskip("scipy.signal")
    values = _samples(20_000)
    values[7000:7003] = np.nan
    values[12_000] = np.inf
    found = _density(values, 512, pieces)
    sums, count = 0.0, 0
    for first, last in ((0, 7000), (7003, 12_000), (12_001, 20_000)):
        _, power = signal.welch(values[first:last], RATE, "hann", 512, detrend="constant")
        segments = (last - first - 512) // 256 + 1
        sums, count = sums + segments * power, count + segments
    np.testing.assert_allclose(found.power, sums / count, rtol=1e-10)
    assert found.segments == count
    assert found.samples == 20_000
    assert found.used == 256 * (count + 3)


def test_white_noise_has_the_density_and_u_of_theory():
    # S = 2σ²/rate; the scatter between bins is the u that is stated: 2049 bins know it to 2 %.
    rng = np.random.default_rng(3)
    found = _density(0.1 * rng.standard_normal(400_000), 4096)
    inner = found.density[8:-8]
    level = 0.1 * np.sqrt(2 / RATE)
    assert inner.mean() == pytest.approx(level, rel=5e-3)
    assert inner.std() / found.density_u[8:-8].mean() == pytest.approx(1.0, abs=0.08)


def test_a_record_without_a_whole_segment_has_no_segment():
    found = _density(np.ones(100), 256)
    assert (found.segments, found.used, found.samples) == (0, 0, 100)
