"""Folded and Fabry–Perot arms against the sum over the trips, computed apart."""

import cmath
import math

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from metro.kernel.arms import arm_response, sinc
from metro.kernel.cavity import (
    cavity_pole_hz,
    cavity_response,
    finesse,
    folded_response,
    phase_gain,
    resonance_reflectance,
)
from metro.kernel.constants import SPEED_OF_LIGHT_M_S

reflectances = st.floats(0.3, 0.998)


def reflected(phase, r1, r2):
    """Amplitude reflected by two mirrors, the first without loss: the sum of all trips."""
    return -r1 + (1 - r1 * r1) * r2 * cmath.exp(1j * phase) / (1 - r1 * r2 * cmath.exp(1j * phase))


@given(reflectances, st.floats(0.0, 1.0))
def test_phase_gain_is_the_slope_of_the_reflected_phase(input_reflectance, share):
    end = input_reflectance + (1 - input_reflectance) * (0.5 + 0.5 * share)
    r1, r2 = math.sqrt(input_reflectance), math.sqrt(end)
    step = 1e-4 * (1 - r1 * r2)
    above, below = (cmath.phase(reflected(s * step, r1, r2)) for s in (1, -1))
    assert phase_gain(input_reflectance, end) == pytest.approx(
        (above - below) / (2 * step), rel=1e-5
    )
    assert resonance_reflectance(input_reflectance, end) == pytest.approx(
        abs(reflected(0, r1, r2)) ** 2
    )


def test_perfect_end_mirror():
    assert phase_gain(0.97) == pytest.approx((1 + math.sqrt(0.97)) / (1 - math.sqrt(0.97)))
    assert resonance_reflectance(0.97) == pytest.approx(1.0)
    assert phase_gain(0.0) == 1.0  # no input mirror: one round trip
    # 2F/π round trips, the trade's rule, holds for good mirrors
    assert phase_gain(0.9999) == pytest.approx(2 * finesse(0.9999) / math.pi, rel=1e-6)


@given(reflectances, reflectances)
def test_finesse_is_the_width_of_the_resonance(first, second):
    rho = math.sqrt(first * second)
    half_width = math.pi / finesse(first, second)
    stored = abs(1 / (1 - rho * cmath.exp(1j * half_width))) ** 2 * (1 - rho) ** 2
    assert stored == pytest.approx(0.5, rel=1e-9)


@given(st.floats(0.0, 3e5), reflectances)
def test_storage_is_the_sum_over_the_trips(frequency, reflectance):
    rho = math.sqrt(reflectance)
    trips = np.arange(int(20 / (1 - rho)))
    step = 4 * math.pi * frequency * 4000.0 / SPEED_OF_LIGHT_M_S
    expected = (1 - rho) * np.sum(rho**trips * np.exp(-1j * step * trips))
    assert cavity_response(frequency, 4000.0, reflectance) == pytest.approx(
        expected, abs=1e-8
    )  # e⁻²⁰ of the trips is left out


def test_pole():
    pole = cavity_pole_hz(4000.0, 0.97, 1.0)
    assert abs(cavity_response(pole, 4000.0, 0.97)) == pytest.approx(math.sqrt(0.5), rel=1e-4)
    assert pole == pytest.approx(SPEED_OF_LIGHT_M_S / (4 * 4000.0 * finesse(0.97)))


@given(st.floats(0.1, 1e5), st.integers(1, 30))
def test_folded_arms_are_one_long_sinc(frequency, trips):
    length = 3000.0
    angle = 2 * math.pi * frequency * length / SPEED_OF_LIGHT_M_S
    found = arm_response(frequency, length) * folded_response(frequency, length, trips)
    assert found == pytest.approx(sinc(trips * angle) * cmath.exp(-1j * trips * angle), abs=1e-12)


def test_mirrors_in_the_wrong_order():
    with pytest.raises(
        ValueError, match=r"input_reflectance must be below end_reflectance, got 0.99 and 0.9"
    ):
        phase_gain(0.99, 0.9)
    with pytest.raises(ValueError, match="the mirrors must reflect more"):
        finesse(0.01, 0.01)
