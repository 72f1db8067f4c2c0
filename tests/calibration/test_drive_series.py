"""Drive series: the Rayleigh law integrated over its loop, straight lines that cover, refusals."""

import numpy as np
import pytest

from calibration.drive_series import RAYLEIGH_LAG, SeriesPoint, fit_series

UP = (0.5, 1.0, 2.0, 4.0)
UP_DOWN = (*UP, 3.0, 1.5, 0.7)


def rayleigh(amplitude_v, d0, alpha):
    """The law's loop sampled over one period, and its fundamental: no formula of the module."""
    turn = 2 * np.pi * np.arange(20_000) / 20_000
    drive = amplitude_v * np.cos(turn)
    side = np.where(np.sin(turn) > 0, 1.0, -1.0)  # falling in the first half
    moved = (d0 + alpha * amplitude_v) * drive
    moved += side * alpha / 2 * (amplitude_v**2 - drive**2)
    return 2 * np.mean(moved * np.exp(-1j * turn)) / amplitude_v


def points(drives, rng=None, *, u=2e-12, d0=30e-9, alpha=0.6e-9, falling=0.0):
    top = int(np.argmax(drives))
    noise = (
        0.0
        if rng is None
        else u * (rng.normal(size=len(drives)) + 1j * rng.normal(size=len(drives)))
    )
    exact = np.array([rayleigh(v, d0, alpha) for v in drives])
    exact = exact + falling * (np.arange(len(drives)) > top) + noise
    return [SeriesPoint(v, complex(c), u) for v, c in zip(drives, exact, strict=True)]


def test_a_rayleigh_loop_gives_back_its_parameters():
    found = fit_series(87.1, points(UP_DOWN, falling=0.2e-9), 0.0)
    assert found.small_signal.magnitude == pytest.approx(30e-9, rel=1e-6)
    assert found.amplitude_slope.magnitude == pytest.approx(0.6e-9, rel=1e-6)
    assert found.lag.magnitude == pytest.approx(RAYLEIGH_LAG, rel=1e-6)
    assert pytest.approx(4 / (3 * np.pi)) == RAYLEIGH_LAG
    assert found.up_down.magnitude == pytest.approx(0.2e-9, rel=1e-6)
    assert (found.from_v, found.to_v) == (0.5, 4.0)
    assert found.reasons == []


@pytest.mark.slow
def test_small_signal_and_slope_cover():
    """400 draws: coverage within 3.3 % of 95 %, 3 standard deviations (1.09 %)."""
    rng, inside = np.random.default_rng(12), []
    for _ in range(400):
        found = fit_series(87.1, points(UP_DOWN, rng, u=30e-12), 0.0)
        for value, true in ((found.small_signal, 30e-9), (found.amplitude_slope, 0.6e-9)):
            k = value.coverage_factor(0.95)
            inside.append(abs(value.magnitude - true) < k * value.u_magnitude)
    cover = np.mean(np.reshape(inside, (-1, 2)), axis=0)
    # u is widened by Birge's ratio but never narrowed: some more than 95 %
    assert ((cover > 0.917) & (cover < 0.995)).all(), cover


def test_what_all_points_share_is_in_the_small_signal():
    found = fit_series(87.1, points(UP), 0.01)
    assert found.small_signal.relative_u == pytest.approx(0.01, rel=0.01)
    assert found.up_down is None


def test_too_few_drives_say_so():
    assert fit_series(87.1, points((1.0, 2.0)), 0.0) == (
        "the drive series says nothing about the line at 87.1 Hz: it needs at least 3 drives, the "
        "largest 1.5 times the smallest, got 2 from 1 V to 2 V"
    )
    assert "got 3 from 1 V to 1.2 V" in fit_series(87.1, points((1.0, 1.1, 1.2)), 0.0)


def test_a_curve_is_no_straight_line():
    bent = [
        SeriesPoint(p.drive_v, p.coefficient * (1 + 0.02 * (p.drive_v - 2) ** 2), p.u)
        for p in points(UP_DOWN)
    ]
    found = fit_series(87.1, bent, 0.0)
    assert "is no straight line of the drive: chi-square" in found.reasons[0]
    assert found.small_signal.relative_u > 1e-3


def test_creep_is_the_mean_change_within_the_recordings():
    crept = [
        SeriesPoint(p.drive_v, p.coefficient, p.u, 0.01 * p.coefficient, 1e-11) for p in points(UP)
    ]
    found = fit_series(87.1, crept, 0.0)
    assert found.creep.magnitude == pytest.approx(0.01, rel=0.1)
    assert found.creep.u_magnitude == pytest.approx(1e-11 / 2 / 30e-9, rel=0.1)
