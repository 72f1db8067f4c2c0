"""Coherence, tilt, real fringes, and detectors with two outputs."""

import math

import numpy as np
import pytest
import strategies as values
from hypothesis import given
from hypothesis import strategies as st

from metro.kernel import beam, fringe, ports
from metro.kernel import contrast as contrast_kernel
from metro.kernel.constants import SPEED_OF_LIGHT_M_S

phases = st.floats(-10.0, 10.0)


def test_coherence_is_the_transform_of_the_line():
    """|∫ L(ν) exp(2πiντ) dν| for a Lorentzian of 1 MHz full width, by a fine sum."""
    width, path = 1e6, 60.0
    nu = np.linspace(-4e9, 4e9, 400_001)
    line = (width / 2 / math.pi) / (nu**2 + (width / 2) ** 2)
    expected = np.sum(line * np.cos(2 * np.pi * nu * path / SPEED_OF_LIGHT_M_S)) * (nu[1] - nu[0])
    # the wings beyond 4 GHz hold 8e-5 of the line
    assert beam.coherence(path, width) == pytest.approx(expected, abs=2e-4)
    assert beam.coherence(beam.coherence_length_m(width), width) == pytest.approx(math.exp(-1))
    assert beam.coherence(0.0, width) == 1.0


def test_tilt_contrast_is_the_overlap_of_two_gaussian_beams():
    wavelength, radius, tilt = 633e-9, 1e-3, 40e-6
    x = np.linspace(-5e-3, 5e-3, 20001)
    overlap = np.sum(np.exp(-2 * x**2 / radius**2) * np.cos(2 * np.pi / wavelength * 2 * tilt * x))
    expected = overlap / np.sum(np.exp(-2 * x**2 / radius**2))
    assert beam.tilt_contrast(tilt, radius, wavelength) == pytest.approx(expected, rel=1e-9)
    assert beam.tilt_displacement_m(1e-6, 3e-4) == pytest.approx(3e-10)


@given(
    phases,
    values.extremes_v,
    st.lists(st.tuples(st.floats(-0.1, 0.1), st.floats(-0.1, 0.1)), max_size=4),
)
def test_real_fringe_and_its_slope(phase, extremes, harmonics):
    low, high = extremes
    step = 1e-6
    above, below = (beam.real_fringe(phase + s * step, low, high, harmonics) for s in (1, -1))
    found = beam.real_fringe_slope(phase, low, high, harmonics)
    assert found == pytest.approx((above - below) / (2 * step), abs=1e-7)
    assert beam.real_fringe(phase, low, high, []) == pytest.approx(fringe.voltage(phase, low, high))


@given(phases, st.floats(1e-6, 1e-3), values.contrast)
def test_two_ports_share_the_power_and_cancel_its_noise(phase, power, contrast):
    first, second = ports.antiphase_powers(phase, power, contrast)
    assert first + second == pytest.approx(2 * power, rel=1e-15)
    assert first == pytest.approx(
        contrast_kernel.power_w(phase, power, contrast), abs=1e-15 * power
    )
    for gain in (1.0, 0.3):
        found = ports.cosine_of_ports(gain * first, gain * second, contrast)
        assert found == pytest.approx(math.cos(phase), abs=1e-13 / contrast)


@given(st.floats(-3.1, 3.1), st.floats(0.1, 10.0), st.floats(0.5, 2.0), st.floats(-0.5, 0.5))
def test_quadrature_returns_its_phase(phase, amplitude, ratio, lag):
    signals = ports.quadrature_signals(phase, amplitude, ratio, lag)
    assert ports.quadrature_phase(*signals, ratio, lag) == pytest.approx(phase, abs=1e-12)


def test_uncorrected_quadrature_errs_as_published():
    """Peak periodic errors [rad] of a gain ratio of 1.01 and of a lag of 1°, computed apart."""
    turns = np.linspace(-math.pi / 2, math.pi / 2, 4001)  # they have two cycles a fringe
    for ratio, lag, peak in (
        (1.01, 0.0, 0.004975144901946),
        (1.0, math.radians(1), 0.008726978563967),
    ):
        errors = [
            ports.quadrature_phase(*ports.quadrature_signals(t, 1.0, ratio, lag)) - t for t in turns
        ]
        swing = (max(errors) - min(errors)) / 2
        # the sampling of the peak costs 1e-7
        assert swing == pytest.approx(peak, abs=1e-7)
