"""Filters within a band: sines come out as the response says, gaps spread no further than its reach."""

import numpy as np
import pytest

from calibration.band_filter import design_filter
from calibration.errors import CalibrationError

RATE_HZ = 4000.0


def pole(at_hz):
    return 1.0 + 1j * at_hz / 1500.0


def integrator(at_hz):
    return 1.0 + 80.0 / (1j * at_hz) * np.exp(-2j * np.pi * at_hz * 2e-4)


@pytest.mark.parametrize(
    ("response", "from_hz", "to_hz", "lines"),
    [
        (pole, 0.0, 1600.0, (3.0, 500.0, 1500.0)),
        (integrator, 10.0, 1000.0, (10.0, 31.7, 87.1, 900.0)),
    ],
)
def test_sines_come_out_as_the_response_says(response, from_hz, to_hz, lines):
    made = design_filter(response, from_hz, to_hz, RATE_HZ)
    assert made.error < 2e-3
    time_s = np.arange(-made.reach, 3000 + made.reach) / RATE_HZ
    for line_hz in lines:
        out = made.apply(np.cos(2 * np.pi * line_hz * time_s + 0.3))
        factor = complex(response(np.array([line_hz]))[0])
        turn = 2 * np.pi * line_hz * time_s[made.reach : -made.reach] + 0.3 + np.angle(factor)
        np.testing.assert_allclose(
            out, abs(factor) * np.cos(turn), atol=2 * made.error * abs(factor)
        )


def test_outside_the_band_nothing_is_left():
    made = design_filter(integrator, 40.0, 1000.0, RATE_HZ)
    time_s = np.arange(-made.reach, 3000 + made.reach) / RATE_HZ
    for line_hz in (0.0, 10.0, 1500.0):
        out = made.apply(np.cos(2 * np.pi * line_hz * time_s))
        assert np.abs(out).max() < 2e-3


def test_gaps_spread_by_the_reach_and_no_further():
    made = design_filter(pole, 0.0, 1600.0, RATE_HZ)
    values = np.random.default_rng(1).normal(size=3000)
    gappy = values.copy()
    gappy[1500] = np.nan
    whole, out = made.apply(values), made.apply(gappy)
    hit = np.isnan(out)
    assert hit.sum() == made.taps.size
    assert hit[1500 - 2 * made.reach : 1501].all()
    np.testing.assert_allclose(out[~hit], whole[~hit], atol=1e-12)


def test_it_is_a_convolution():
    """Against numpy's own, sample by sample."""
    made = design_filter(pole, 0.0, 1600.0, RATE_HZ)
    values = np.random.default_rng(1).normal(size=800)
    np.testing.assert_allclose(
        made.apply(values), np.convolve(values, made.taps, "valid"), atol=1e-12
    )


def test_bands_that_cannot_be_are_refused():
    with pytest.raises(CalibrationError, match="nothing is left of the band from 2000 Hz"):
        design_filter(pole, 2000.0, 3000.0, RATE_HZ)
    with pytest.raises(CalibrationError, match="more than 1048576"):
        design_filter(pole, 1e-3, 1000.0, 1e6)
