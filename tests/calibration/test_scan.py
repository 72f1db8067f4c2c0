"""Extremes from a scan: unbiased, with a standard uncertainty that covers."""

import numpy as np
import pytest

from calibration.errors import CalibrationError
from calibration.scan import ScanFit, fit_scan

RATE_HZ = 4000.0


def scan(
    seed, *, power_noise=0.003, noise=0.001, vibration=0.1, walk=0.3, drift=0.0, step=3.3 / 4096
):
    """Return a scan by a triangle over 5 to 10 fringes on a shaking bench, and its extremes."""
    rng = np.random.default_rng(seed)
    n = int(rng.uniform(3.0, 6.0) * RATE_HZ)
    t = np.arange(n) / RATE_HZ
    triangle = 2 * np.abs(2 * ((t / t[-1] * rng.integers(1, 4) + rng.uniform()) % 1) - 1) - 1
    phase = np.pi * rng.uniform(5, 10) * triangle + rng.uniform(0, 2 * np.pi)
    phase += np.cumsum(rng.normal(size=n)) * walk / np.sqrt(RATE_HZ)
    for _ in range(3):
        phase += vibration * np.cos(2 * np.pi * rng.uniform(30, 80) * t + rng.uniform(0, 7))
    contrast = rng.uniform(0.7, 0.98)
    volts = 1.5 * (1 + contrast * np.cos(phase))
    volts *= 1 + power_noise * rng.normal(size=n) + drift * (t / t[-1] - 0.5)
    volts += noise * rng.normal(size=n)
    if step:
        volts = np.round(volts / step) * step
    return volts, 1.5 * (1 - contrast), 1.5 * (1 + contrast)


def pulls(seeds, **bench):
    """Return the normalised errors of low, high and span, and the relative errors of the span."""
    out = []
    for seed in seeds:
        volts, low, high = scan(seed, **bench)
        fit = fit_scan(volts, RATE_HZ)
        assert fit.is_trustworthy, fit.reasons
        span_u = np.sqrt(fit.covariance.sum() - 4 * fit.covariance[0, 1])
        span = fit.high - fit.low - (high - low)
        out.append(
            [
                (fit.low - low) / fit.low_u,
                (fit.high - high) / fit.high_u,
                span / span_u,
                span / (high - low),
            ]
        )
    return np.array(out)


def test_extremes_lie_within_their_uncertainty():
    got = pulls(range(24))
    assert np.all(np.abs(got[:, :3]) < 4)
    assert np.all(np.abs(got[:, 3]) < 2e-3)
    assert abs(got[:, 3].mean()) < 3e-4


@pytest.mark.trials
def test_normalised_errors_have_unit_width():
    got = pulls(range(1000, 1400))
    assert np.all(np.abs(got[:, :3].mean(axis=0)) < 0.15)
    assert np.all((got[:, :3].std(axis=0) > 0.9) & (got[:, :3].std(axis=0) < 1.1))
    assert abs(got[:, 3].mean()) < 1e-4


def test_minimum_and_maximum_would_exaggerate_where_the_fit_does_not():
    # 20 dB: σ² = (half span)²/2/100
    errors, naive = [], []
    for seed in range(12):
        volts, low, high = scan(seed, power_noise=0.0, noise=0.0, step=0.0)
        half = (high - low) / 2
        volts += np.random.default_rng(seed).normal(size=len(volts)) * half / np.sqrt(200)
        fit = fit_scan(volts, RATE_HZ)
        errors.append((fit.high - fit.low) / (high - low) - 1)
        naive.append(np.ptp(volts) / (high - low) - 1)
    assert abs(np.mean(errors)) < 1e-3
    assert 0.16 < np.mean(naive) < 0.3


def test_a_drifting_power_is_followed_to_the_middle_of_the_scan():
    for seed in range(6):
        volts, low, high = scan(seed, drift=0.02)
        fit = fit_scan(volts, RATE_HZ)
        assert fit.high == pytest.approx(high, rel=2.5e-3)
        assert fit.low == pytest.approx(low, abs=2e-3 * high)
        assert fit.drift[1] == pytest.approx(0.02 * high, rel=0.3)


def test_missing_samples_are_left_out():
    volts, low, high = scan(3)
    volts[2000:2600] = np.nan
    fit = fit_scan(volts, RATE_HZ)
    assert fit.high == pytest.approx(high, rel=1e-3)
    assert fit.low == pytest.approx(low, abs=1e-3 * high)


def test_less_than_one_fringe_is_not_trusted():
    t = np.linspace(0, 1, 4000)
    volts = 2 + np.cos(0.3 + 2.2 * t) + 0.002 * np.random.default_rng(1).normal(size=4000)
    fit = fit_scan(volts, RATE_HZ)
    assert not fit.is_trustworthy
    assert "less than one whole fringe" in fit.reasons[0]


def test_what_cannot_be_a_scan_is_refused():
    with pytest.raises(CalibrationError, match="a scan needs 40 samples, got 10"):
        fit_scan(np.arange(10.0), RATE_HZ)
    with pytest.raises(CalibrationError, match=r"the scan does not change: every sample is 1\.0"):
        fit_scan(np.ones(100), RATE_HZ)
    with pytest.raises(CalibrationError, match=r"rate_hz must be finite and > 0 Hz, got 0\.0"):
        fit_scan(np.arange(100.0), 0.0)


def test_result_type():
    volts, _, _ = scan(1)
    fit = fit_scan(volts, RATE_HZ)
    assert isinstance(fit, ScanFit)
    assert fit.covariance.shape == (2, 2)
    assert min(fit.passes) >= 4


@pytest.mark.parametrize(("second", "third"), [(0.04, 0.0), (0.0, 0.05)])
def test_a_fringe_that_is_no_cosine_is_named(second, third):
    for seed in range(3):
        volts, low, high = scan(seed, power_noise=0.001)
        half = (high - low) / 2
        x = np.clip((volts - low) / half - 1, -1, 1)
        # Chebyshev: cos 2φ = 2x² − 1, cos 3φ = 4x³ − 3x
        volts = volts + half * (second * (2 * x**2 - 1) + third * (4 * x**3 - 3 * x))
        fit = fit_scan(volts, RATE_HZ)
        assert fit.harmonics == pytest.approx([second, third], abs=0.016)
        assert any("no cosine" in reason for reason in fit.reasons)


def test_the_law_of_an_ideal_fringe_has_no_harmonics():
    for seed in range(4):
        volts, _, _ = scan(seed)
        fit = fit_scan(volts, RATE_HZ)
        assert fit.harmonics == pytest.approx([0.0, 0.0], abs=0.016)
        assert np.all(fit.harmonics_u < 0.02)


def test_clipping_is_named():
    for share in (0.03, 0.1):
        volts, low, high = scan(2)
        fit = fit_scan(np.minimum(volts, high - share * (high - low)), RATE_HZ)
        assert any("top is clipped" in reason for reason in fit.reasons)


@pytest.mark.parametrize("levels", [40, 150])
def test_coarse_steps_without_noise(levels):
    for seed in range(3):
        volts, low, high = scan(seed, power_noise=0.0, noise=0.0, step=2.9 / levels)
        fit = fit_scan(volts, RATE_HZ)
        assert fit.is_trustworthy, fit.reasons
        assert fit.high == pytest.approx(high, abs=0.15 * 2.9 / levels)
        assert fit.low == pytest.approx(low, abs=0.15 * 2.9 / levels)
