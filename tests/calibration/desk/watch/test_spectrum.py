"""The running spectrum of a live page, against scipy's and the statistics of white noise."""

import numpy as np
import pytest
from scipy import signal

from calibration.desk.watch.spectrum import RunningSpectrum

RATE_HZ = 1000.0


def fed(values, start=0, size=237):
    spectrum = RunningSpectrum(RATE_HZ)
    for first in range(0, values.size, size):
        spectrum.add(start + first, values[first : first + size])
    return spectrum


def test_agrees_with_scipy_while_it_is_a_plain_mean():
    # Welch 1967; up to 16 segments are averaged evenly, as scipy.signal.welch does with all.
    values = np.cumsum(np.random.default_rng(1).normal(size=1024 * 8))
    spectrum = fed(values)
    assert spectrum.length == 1024
    frequency_hz, power = signal.welch(
        values, RATE_HZ, window="hann", nperseg=1024, noverlap=512, detrend="constant"
    )
    np.testing.assert_allclose(spectrum.frequencies_hz, frequency_hz)
    np.testing.assert_allclose(spectrum.power_density(), power, rtol=1e-9)


def test_white_noise_has_its_level_in_every_bin():
    # One-sided power density of white noise: 2σ²/rate. 16 segments are worth some 15 averages; bins
    # of k frequencies scatter by 1/√(15·k/1.9), and 200 bins are looked at: 5 standard deviations.
    sigma = 0.3
    spectrum = fed(np.random.default_rng(2).normal(0.0, sigma, 30_000))
    view = spectrum.view()
    expected = np.sqrt(2 * sigma**2 / RATE_HZ)
    wide = view.frequency_hz > 100.0
    assert np.abs(view.density[wide] / expected - 1).max() < 0.5
    assert view.density[wide].mean() == pytest.approx(expected, rel=0.02)
    assert (view.highest >= view.density).all()


def test_a_line_stands_as_high_as_the_window_says():
    # Amplitude A at a frequency of the grid: peak power density A²/2 over the equivalent noise
    # bandwidth, 1.5 frequencies for Hann (F. J. Harris, Proc. IEEE 66 (1978) 51, table 1).
    line_hz = 100 * RATE_HZ / 1024
    values = 0.2 * np.cos(2 * np.pi * line_hz * np.arange(20_000) / RATE_HZ)
    view = fed(values).view()
    assert view.noise_bandwidth_hz == pytest.approx(1.5 * RATE_HZ / 1024)
    place = int(np.argmax(view.highest))
    assert view.frequency_hz[place] == pytest.approx(line_hz, rel=0.02)
    assert view.highest[place] == pytest.approx(
        np.sqrt(0.2**2 / 2 / view.noise_bandwidth_hz), rel=1e-3
    )


def test_older_segments_fade_out():
    quiet, loud = np.random.default_rng(3).normal(size=(2, 60_000)) * [[1.0], [10.0]]
    spectrum = fed(np.concatenate([loud, quiet]))
    level = np.median(spectrum.view().density)
    assert level == pytest.approx(np.sqrt(2 / RATE_HZ), rel=0.15)


def test_segments_with_lost_samples_are_left_out_and_counted():
    values = np.random.default_rng(4).normal(size=10_240)
    hurt = values.copy()
    hurt[5000] = np.nan
    spectrum = fed(hurt)
    assert spectrum.view().left_out == 2  # sample 5000 lies in two segments that overlap
    assert np.isfinite(spectrum.view().density).all()


def test_a_gap_begins_a_new_segment():
    values = np.random.default_rng(5).normal(size=1500)
    spectrum = RunningSpectrum(RATE_HZ)
    spectrum.add(0, values[:1000])
    spectrum.add(1100, values[:1023])
    assert spectrum.view().averages == 0
    spectrum.add(2123, values[:1])
    assert spectrum.view().averages == 1
    assert spectrum.view().left_out == 1


@pytest.mark.parametrize("rate_hz", [1.0, 10.0, 333.0, 50_000.0, 2e6])
def test_any_rate_gives_a_view_of_bounded_size(rate_hz):
    spectrum = RunningSpectrum(rate_hz)
    values = np.random.default_rng(6).normal(size=2 * spectrum.length)
    spectrum.add(0, values)
    view = spectrum.view()
    assert 0 < view.frequency_hz.size <= 500
    assert (np.diff(view.frequency_hz) > 0).all()
    assert np.sqrt(np.mean(view.density**2)) == pytest.approx(np.sqrt(2 / rate_hz), rel=0.35)
