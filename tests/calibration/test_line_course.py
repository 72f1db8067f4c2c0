"""Phasors over time, harmonics and intermodulation, and the clock's drift: values and their u."""

import numpy as np
import pytest

from calibration import fit_lines
from calibration.errors import CalibrationError
from calibration.line_product import combinations_of
from calibration.lines import fit_lines_si

RATE = 4000.0


def _line(samples, seed, *, growth=0.0, slip=0.0, noise=0.1, walk=0.0):
    """Return a line of 87.13 Hz that grows and slips over the recording, in noise."""
    rng = np.random.default_rng(seed)
    x = np.linspace(-1, 1, samples)
    turns = 2 * np.pi * 87.13 * np.arange(samples) / RATE + 0.7 + slip * x**2
    values = (1 + growth * x) * np.cos(turns) + noise * rng.standard_normal(samples)
    return values + walk * np.cumsum(rng.standard_normal(samples))


def test_a_line_that_grows_and_slips_is_followed_bin_by_bin():
    (line,) = fit_lines_si(_line(40_000, 1, growth=0.2, noise=0.01), RATE, [87.13]).lines
    course = line.course
    assert len(course.time_s) == 24
    x = course.time_s / 5 - 1
    np.testing.assert_allclose(course.amplitude, 1 + 0.2 * x, atol=5e-3)
    (line,) = fit_lines_si(_line(40_000, 1, growth=0.02, noise=0.01), RATE, [87.13]).lines
    # √(2/N)·σ of each bin; the growth is no noise.
    np.testing.assert_allclose(line.course.u, 0.01 * np.sqrt(2 * 24 / 40_000), rtol=0.25)
    (line,) = fit_lines_si(
        _line(40_000, 1, slip=0.3, noise=0.01), RATE, [87.13], search_clock=False
    ).lines
    np.testing.assert_allclose(
        line.course.phase_rad, 0.7 + 0.3 * (x**2 + 1 / (3 * 24**2)), atol=6e-3
    )


@pytest.mark.parametrize("walk", [0.0, 0.05])
def test_the_u_of_a_bin_is_its_scatter(walk):
    # 40 records of 24 bins: a spread known to √(1/2·960) = 2.3 %; the mean of a record is common to its
    # bins and its own noise. Three times that, and 3 % for the record's u.
    pulls = []
    for seed in range(40):
        (line,) = fit_lines_si(_line(20_000, seed, noise=0.1, walk=walk), RATE, [87.13]).lines
        course = line.course
        pulls += ((course.amplitude - 1) / course.amplitude_u).tolist()
        pulls += ((course.phase_rad - 0.7) / course.phase_u_rad).tolist()
    assert np.std(pulls) == pytest.approx(1.0, abs=0.08)
    assert abs(np.mean(pulls)) < 0.1


def test_bins_in_gaps_are_left_out():
    values = _line(40_000, 3)
    values[10_000:20_000] = np.nan
    course = fit_lines_si(values, RATE, [87.13]).lines[0].course
    assert not ((course.time_s > 2.6) & (course.time_s < 4.9)).any()
    assert np.abs(course.amplitude - 1).max() < 5 * course.u.max()


def test_a_short_record_has_no_course():
    assert fit_lines_si(_line(400, 1), RATE, [87.13]).lines[0].course is None


def test_the_noise_beside_a_line_has_its_density():
    (line,) = fit_lines_si(_line(40_000, 5), RATE, [87.13]).lines
    beside = line.beside
    rms = np.sqrt((beside.density[beside.used] ** 2).mean())
    assert rms == pytest.approx(line.density_value, rel=0.05)
    assert beside.frequency_hz.min() > 87.13 - 33 * 0.1
    assert beside.frequency_hz.max() < 87.13 + 33 * 0.1


# --- harmonics and intermodulation --------------------------------------------------------------


@pytest.mark.parametrize("free", [False, True])
@pytest.mark.parametrize("offset", [0.0, 5e-5])
def test_what_a_bent_curve_makes(free, offset):
    # (a + b)² = a²/2 + b²/2 + harmonics of half the squares + a·b at the sum and at the difference.
    rng = np.random.default_rng(2)
    t = np.arange(40_000) / RATE * (1 + offset)
    x = np.cos(2 * np.pi * 87.13 * t) + 0.7 * np.cos(2 * np.pi * 211.37 * t + 1)
    values = x + 0.05 * x**2 + 0.02 * rng.standard_normal(len(t))
    fit = fit_lines(
        values, "4 kHz", ["87.13 Hz", "211.37 Hz"], free=free, harmonics=3, intermodulation=True
    )
    assert fit.is_trustworthy
    expected = {
        (2, 0): 0.025, (0, 2): 0.05 * 0.49 / 2 / 0.7, (3, 0): 0.0, (0, 3): 0.0,
        (-1, 1): 0.05, (1, 1): 0.05,
    }  # fmt: skip
    assert {p.orders for p in fit.products} == set(expected)
    for product in fit.products:
        ratio, truth = product.relative, expected[product.orders]
        # A product that is not there has a length of some u by noise.
        assert abs(float(ratio.magnitude) - truth) < 4 * float(ratio.u_magnitude)
        assert product.is_seen is (truth > 0)
        assert float(ratio.u_magnitude) == pytest.approx(0.02 * np.sqrt(2 / 40_000), rel=0.8)
    plain = fit_lines(values, "4 kHz", ["87.13 Hz", "211.37 Hz"], free=free)
    assert plain.products == ()
    for one, other in zip(fit.lines, plain.lines, strict=True):
        assert abs(one.phasor - other.phasor) < 0.5 * other.response.along_u


@pytest.mark.parametrize("harmonics", [1, 2])
def test_a_fringe_top_is_named_whether_the_harmonic_is_fitted_or_not(harmonics):
    turns = 2 * np.pi * 87.13 * np.arange(20_000) / RATE
    values = 0.05 * np.cos(turns) + np.cos(2 * turns)
    values += 0.01 * np.random.default_rng(1).standard_normal(20_000)
    fit = fit_lines_si(values, RATE, [87.13], harmonics=harmonics)
    assert "at a fringe top or bottom" in " ".join(fit.distrust_reasons)


def test_relative_amplitudes_scatter_as_their_u_says():
    pulls = []
    for seed in range(60):
        rng = np.random.default_rng(seed)
        turns = 2 * np.pi * 87.13 * np.arange(8000) / RATE + rng.uniform(0, 6)
        values = np.cos(turns) + 0.1 * np.cos(2 * turns + 1) + 0.1 * rng.standard_normal(8000)
        (product,) = fit_lines_si(values, RATE, [87.13], harmonics=2).products
        pulls.append(
            (float(product.relative.magnitude) - 0.1) / float(product.relative.u_magnitude)
        )
    # 60 records: 9 % of the spread, three of it.
    assert np.std(pulls) == pytest.approx(1.0, abs=0.28)
    assert abs(np.mean(pulls)) < 0.45


def test_combinations_stay_below_half_the_rate_and_apart():
    found = combinations_of([100.0, 200.0, 450.0], 1000.0, 10.0, harmonics=3, intermodulation=True)
    names = {one.orders: one.frequency_hz for one in found}
    # 2·100 is a line; 3·100 = 300 and 200 + 100 are one; 2·450 and 3·200 lie too high.
    assert names == {
        (0, 2, 0): 400.0, (3, 0, 0): 300.0, (-1, 0, 1): 350.0, (0, -1, 1): 250.0,
    }  # fmt: skip
    with pytest.raises(CalibrationError, match="harmonics must be 1 to 20, got 0"):
        combinations_of([100.0], 1000.0, 10.0, harmonics=0)


# --- the clock's drift --------------------------------------------------------------------------


def test_the_drift_of_a_clock_and_its_u():
    # 40 records: the spread of the pulls is known to 11 %.
    pulls, n, drift = [], 40_000, 3e-6
    t = np.arange(n) / RATE
    for seed in range(40):
        turns = 2 * np.pi * (1 + 1e-5) * t + 2 * np.pi * 0.5 * drift * (t - t[-1] / 2) ** 2
        rng = np.random.default_rng(seed)
        values = sum(np.cos(f * turns) for f in (87.13, 211.37)) + 0.3 * rng.standard_normal(n)
        fit = fit_lines_si(values, RATE, [87.13, 211.37])
        pulls.append(
            (float(fit.clock_drift.magnitude) - drift) / float(fit.clock_drift.u_magnitude)
        )
    assert np.std(pulls) == pytest.approx(1.0, abs=0.33)
    assert abs(np.mean(pulls)) < 0.5
    assert fit.clock_drift.unit == "1/s"
