"""Coverage of the driven fringe: 95 % intervals hold 95 times in 100, and no wrong minimum is taken.

The quick versions run small records; the slow ones the sizes that the acceptance names: 20 000
samples, at least 2.5·(m + 5) samples a period, 20 dB.
"""

import numpy as np
import pytest

from calibration.driven_fringe import fit_driven_fringe_si
from metro.kernel.student import t_quantile

RATE_HZ = 1000.0


def trial(kind, seed, samples):
    """Return the normalised errors of depth, low and high, their t factor, and the fit."""
    rng = np.random.default_rng([seed, samples])
    depth = (
        np.exp(rng.uniform(0, np.log(320)))
        if kind == "deep"
        else np.exp(rng.uniform(np.log(0.02), 0))
    )
    if samples < 20_000 and kind == "deep":
        depth = min(depth, 40.0)
    if kind != "deep" and samples < 20_000:
        depth = max(depth, 0.1)
    f = RATE_HZ / (2.5 * (depth + 5)) * rng.uniform(0.5, 1.0)
    half = rng.uniform(0.5, 2.0)
    middle = half / rng.uniform(0.2, 1.0)
    t = np.arange(samples) / RATE_HZ
    working = rng.uniform(-np.pi, np.pi) if kind != "given" else rng.uniform(0.5, np.pi - 0.5)
    phase = working + depth * np.cos(2 * np.pi * f * t + rng.uniform(0, 6))
    if kind == "drift":
        phase += rng.choice([-1, 1]) * rng.uniform(3.3, 6) * t / t[-1]
    volts = middle + half * np.cos(phase) + half / np.sqrt(200) * rng.normal(size=samples)
    given = {}
    if kind == "given":
        u = 0.01 * half
        low, high = np.array([middle - half, middle + half]) + u * rng.normal(size=2)
        given = {"low": low, "high": high, "low_u": u, "high_u": u}
    fit = fit_driven_fringe_si(volts, RATE_HZ, [f], **given)
    errors = [
        (float(got.magnitude) - truth) / float(got.u_magnitude)
        for got, truth in (
            (fit.phase_amplitude[0], depth),
            (fit.low, middle - half),
            (fit.high, middle + half),
        )
    ]
    return errors, t_quantile(0.95, fit.phase_amplitude[0].dof), fit


def run(kind, count, samples):
    got = [trial(kind, seed, samples) for seed in range(count)]
    errors = np.array([one[0] for one in got])
    factor = np.array([one[1] for one in got])
    return errors, np.abs(errors) < factor[:, None], [one[2] for one in got]


@pytest.mark.parametrize("kind", ["deep", "given", "drift"])
def test_coverage_of_small_records(kind):
    count = 30 if kind == "drift" else 60
    errors, inside, _ = run(kind, count, 3000)
    # at 95 %, 52 of 60 or 25 of 30 are inside in 99 of 100 runs (binomial); the seeds are fixed
    assert inside[:, 0].sum() >= (25 if count == 30 else 52)
    assert np.abs(errors[:, 0]).max() < 6


@pytest.mark.trials
@pytest.mark.parametrize(("kind", "count"), [("deep", 400), ("given", 400), ("drift", 200)])
def test_coverage_at_the_acceptance_size(kind, count):
    errors, inside, fits = run(kind, count, 20_000)
    share = inside.mean(axis=0)
    print(kind, count, "coverage of depth, low, high:", share, "widths:", errors.std(axis=0))
    assert np.all(share > 0.925)
    assert np.all(share < 0.975)
    assert np.abs(errors).max() < 6  # a wrong minimum lies further off
    assert all(fit.is_trustworthy for fit in fits) or kind != "deep"
