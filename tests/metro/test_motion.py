"""The arms' own motion between stated points, and the noise beside a line."""

import math

import pytest

from metro.bench import Bench
from metro.bench_entry import MotionPoint
from metro.motion import ASSUMED_MOTION, line_noise, motion_density

POINTS = [MotionPoint(10.0, 100e-12), MotionPoint(100.0, 10e-12), MotionPoint(1000.0, 10e-12)]


@pytest.mark.parametrize(
    ("frequency_hz", "density_pm"),
    [(10, 100), (20, 50), (100, 10), (300, 10), (1000, 10), (1, 1000), (5000, 10)],
)
def test_power_laws_between_points(frequency_hz, density_pm):
    assert motion_density(POINTS, frequency_hz) == pytest.approx(density_pm * 1e-12)


def test_one_point_or_a_still_one_hold_for_their_neighbourhood():
    assert motion_density(POINTS[:1], 77.0) == 100e-12
    still = [MotionPoint(10.0, 0.0), MotionPoint(1000.0, 3e-12)]
    assert [motion_density(still, f) for f in (20.0, 900.0)] == [0.0, 3e-12]


def bench(**more):
    return Bench.of(
        wavelength="632.99 nm",
        power="80 uW",
        responsivity="0.4 A/W",
        transimpedance="50 kohm",
        adc__noise="0.2 mV",
        adc__rate="4 kHz",
        **more,
    )


def test_total_is_the_sum_in_power():
    noise = line_noise(bench().chain(), 30.0)
    assert noise.motion == pytest.approx(40e-12)  # as assumed
    assert motion_density(ASSUMED_MOTION, 300.0) == pytest.approx(4e-12)
    assert noise.total == pytest.approx(math.hypot(noise.motion, noise.readout.total))
    assert noise.drive == 0.0


def test_the_converter_reads_the_drive_with_noise_too():
    """0.2 mV over 2 kHz is 4.47 µV/√Hz; through 10 · 35 nm/V that is 1.565 pm/√Hz."""
    for more in ({}, {"photodiode__bandwidth": "60 Hz"}):
        noise = line_noise(bench(**more).chain(), 100.0, 350e-9)
        assert noise.drive == pytest.approx(0.2e-3 / math.sqrt(2000) * 350e-9, rel=1e-9)
