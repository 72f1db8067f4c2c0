"""How much noise a parameter of the driven fringe meets at its own frequency."""

import numpy as np
import pytest

from calibration.fringe_model import FringeModel
from calibration.residual_colour import colour_of

N, TURN = 8192, 2.0 * np.pi * 0.03
WHITE = np.ones(1)
EACH = np.eye(5)  # each parameter by itself: those of a line hardly touch the others


def record(noise):
    """Return model and truth of a line of 0.1 rad at mid-fringe under noise."""
    theta = np.array([2.0, 1.5, 0.1, 0.0, 1.6])
    model = FringeModel(np.zeros(N), np.arange(N), N, np.array([TURN]), 0)
    model.values = -model.residual(theta, 0, N) + noise
    return model, theta


def coloured(density, seed):
    """Return noise whose amplitude spectral density goes as a function of frequency per sample."""
    white = np.random.default_rng(seed).standard_normal(N)
    shape = density(np.fft.rfftfreq(N))
    return 1e-3 * np.fft.irfft(np.fft.rfft(white) * shape, N)


# The median of 64 powers, two in three of them independent, has a relative standard deviation of 0.19,
# its root half of that: five of them are 0.48. The mean of the two parameters of a line is taken.


@pytest.mark.parametrize("seed", range(5))
def test_white_noise_has_no_colour(seed):
    model, theta = record(coloured(np.ones_like, seed))
    factors, dof = colour_of(model, theta, WHITE, EACH)
    assert factors[2:4].mean() == pytest.approx(1.0, abs=0.24)
    assert np.all(factors[:2] >= 1.0)
    assert factors[4] == 1.0
    assert dof > 50.0


@pytest.mark.parametrize("seed", range(5))
@pytest.mark.parametrize("at_line", [0.3, 3.0])
def test_a_hump_or_a_dip_at_the_line_is_met_by_the_line_alone(seed, at_line):
    model, theta = record(
        coloured(lambda f: np.where(abs(f - TURN / (2 * np.pi)) < 0.012, at_line, 1.0), seed)
    )
    factors, _ = colour_of(model, theta, WHITE, EACH)
    power = 0.024 * 2 * at_line**2 + 1 - 0.024 * 2  # the mean of the density squared
    assert factors[2:4].mean() == pytest.approx(at_line / np.sqrt(power), rel=0.48)


@pytest.mark.parametrize("seed", range(5))
def test_white_noise_that_comes_and_goes_is_not_counted_twice(seed):
    """Derivative times residual is white still; its size is in the sum of their squares."""
    step = np.cos(TURN * (np.arange(N) - (N - 1) / 2))
    model, theta = record(coloured(np.ones_like, seed) * step)
    factors, _ = colour_of(model, theta, WHITE, EACH)
    assert factors[2] == pytest.approx(1.0, abs=0.24)


def test_a_short_record_tells_nothing():
    model, theta = record(coloured(np.ones_like, 1))
    short = FringeModel(model.values[:500], np.arange(500), 500, model.turns, 0)
    factors, dof = colour_of(short, theta, WHITE, EACH)
    assert np.all(factors == 1.0)
    assert np.isinf(dof)


def test_missing_samples_and_no_noise_are_no_trouble():
    model, theta = record(np.zeros(N))
    model.values[100:300] = np.nan
    factors, _ = colour_of(model, theta, WHITE, EACH)
    assert np.isfinite(factors).all()
