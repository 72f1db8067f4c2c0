"""The working point on a live page, against the fringe law."""

import numpy as np
import pytest
from sessions import built_in_bench, calibrated

from calibration.desk.watch.fringe import Fringe, resting
from calibration.desk.watch.fringe_finder import FringeFinder, found_fringe
from calibration.desk.watch.setup import WatchSetup
from calibration.desk.watch.stated_fringe import expected_fringe, known_dark
from firmware_bridge.announcement import ChannelInfo
from metro.bench import Bench
from metro.sensitivity import displacement_noise

FRINGE = Fringe(0.5, 3.5, "bench")


@pytest.mark.parametrize("slope", ["rising", "falling"])
@pytest.mark.parametrize("off_deg", [-80.0, -30.0, 0.0, 12.0, 50.0])
def test_resting_is_where_the_law_puts_it(slope, off_deg):
    # V = (high+low)/2 + (high−low)/2 · cos φ; mid-fringe at −90° on the rising slope, +90° on the
    # falling one; towards the top |φ| gets smaller.
    size_rad = np.radians(90.0 - off_deg)
    place = resting(2.0 + 1.5 * np.cos(size_rad), FRINGE, slope)
    assert place.off_rad == pytest.approx(np.radians(off_deg))
    assert place.phase_rad == pytest.approx(-size_rad if slope == "rising" else size_rad)


@pytest.mark.parametrize(
    ("volts", "verdict"),
    [
        (2.0, "at mid-fringe"),
        (2.0 + 1.5 * np.sin(np.radians(14)), "at mid-fringe"),
        (2.0 - 1.5 * np.sin(np.radians(16)), "off mid-fringe"),
        (2.0 + 1.5 * np.sin(np.radians(46)), "near an extreme"),
        (3.5, "near an extreme"),
        (3.6, "outside the fringe"),
        (0.0, "outside the fringe"),
    ],
)
def test_verdict(volts, verdict):
    assert resting(volts, FRINGE, "rising").verdict == verdict


def test_contrast_needs_a_dark():
    assert Fringe.of(0.5, 3.5, "bench", None).contrast is None
    assert Fringe.of(0.5, 3.5, "bench", 0.25).contrast == pytest.approx(3.0 / 3.5)


def scan(seconds, rate_hz, rng, low=0.5, high=3.5, fringes=6.0):
    time_s = np.arange(round(seconds * rate_hz)) / rate_hz
    phase = 2 * np.pi * fringes * np.abs(2 * ((time_s / seconds + 0.13) % 1.0) - 1.0)
    return 0.5 * (low + high) + 0.5 * (high - low) * np.cos(phase) + rng.normal(0, 2e-3, phase.size)


def test_a_scan_passed_by_is_found():
    found = found_fringe(scan(30.0, 2000.0, np.random.default_rng(1)), 2000.0, 0.1)
    assert found.low_v == pytest.approx(0.5, abs=0.01)
    assert found.high_v == pytest.approx(3.5, abs=0.01)
    assert found.contrast == pytest.approx(3.0 / 3.8, abs=0.005)


@pytest.mark.parametrize("amplitude", [0.0, 1e-3, 0.02])
def test_little_more_than_noise_is_no_fringe(amplitude):
    assert found_fringe(modulated(amplitude), 2000.0, None) is None


def test_a_modulation_on_one_slope_is_not_taken_for_a_fringe_that_is_known_to_be_larger():
    values = modulated(0.4)
    assert found_fringe(values, 2000.0, None, least_v=2.4) is None
    # Without that knowledge it cannot be told from a low fringe: it is called the widest seen.
    assert found_fringe(values, 2000.0, None).origin == "widest seen"
    finder = FringeFinder(2000.0)
    looks = [finder.add(k, values[k : k + 500], FRINGE) for k in range(0, values.size, 500)]
    done = [look(None) for look in looks if look is not None]
    assert done == [None] * 5
    low = Fringe(1.55, 2.45, "widest seen")
    finder = FringeFinder(2000.0)
    looks = [finder.add(k, values[k : k + 500], low) for k in range(0, values.size, 500)]
    assert any(look(None) for look in looks if look is not None)


def modulated(amplitude):
    time_s = np.arange(60_000) / 2000.0
    noise = np.random.default_rng(2).normal(0, 2e-3, time_s.size)
    return 2.0 + amplitude * np.sin(2 * np.pi * 31.7 * time_s) + noise


def test_the_finder_keeps_the_last_half_minute_whatever_the_blocks():
    values = np.arange(100_000.0)
    finder = FringeFinder(10_000.0)  # every fifth sample
    rng, start, looks = np.random.default_rng(3), 0, []
    while start < values.size:
        stop = min(values.size, start + int(rng.integers(1, 3000)))
        looks.append(finder.add(start, values[start:stop]))
        start = stop
    kept = finder._kept[np.isfinite(finder._kept)]
    assert sorted(kept) == list(np.arange(0.0, 100_000.0, 5.0))
    assert sum(look is not None for look in looks) == 1  # every five seconds; ten are there


def test_the_bench_says_its_fringe():
    bench = built_in_bench()
    fringe = expected_fringe(bench, None)
    # mean power times responsivity times transimpedance, swing by the contrast
    middle_v = 80e-6 * 0.41 * 62e3
    assert fringe.middle_v == pytest.approx(middle_v)
    assert fringe.swing_v == pytest.approx(0.93 * middle_v)
    stated = expected_fringe(Bench.of(low="0.44 V", high="9.69 V"), None)
    assert (stated.low_v, stated.high_v) == pytest.approx((0.44, 9.69))
    assert stated.origin == "bench"
    assert expected_fringe(Bench(), None) is None
    assert known_dark(Bench(), None) is None


def test_the_expected_noise_is_that_of_the_bench_as_the_converter_sees_it():
    bench = built_in_bench()
    channel = ChannelInfo("photodiode", "V")
    noise = WatchSetup("test", bench).noise(4000.0, channel, np.array([100.0, 500.0]))
    assert set(noise.sources) == {"shot", "johnson", "adc", "motion"}
    chain = bench.chain()
    # At 500 Hz: light, electronics and the stated motion, through slope, amplifier (5 kHz) and
    # anti-alias filter (1.5 kHz); aperture and delay take little.
    total_m = np.hypot(displacement_noise(chain, 500.0).total, 6e-12 * 233.9 / 500.0)
    slope = chain.working_point().slope_v_m
    through = 1 / np.hypot(1, 0.1) / np.hypot(1, 1 / 3)
    assert noise.density[1] == pytest.approx(total_m * slope * through, rel=0.15)


def test_where_nothing_is_known_no_noise_is_expected():
    frequency_hz = np.array([1.0, 10.0])
    volts, plain = ChannelInfo("photodiode", "V", 1e-3), ChannelInfo("photodiode", "1")
    assert WatchSetup("test", Bench()).noise(4000.0, volts, frequency_hz) is None
    assert WatchSetup("test", built_in_bench()).noise(4000.0, plain, frequency_hz) is None


@pytest.mark.slow
def test_a_calibration_goes_before_the_bench(tmp_path):
    _, calibration = calibrated(built_in_bench(), 1, tmp_path)
    setup = WatchSetup("test", Bench.of(low="0.44 V", high="9.69 V"), calibration)
    assert setup.fringe.origin == "calibration"
    assert (setup.fringe.low_v, setup.fringe.high_v) == (
        calibration.extremes.low_v,
        calibration.extremes.high_v,
    )
    assert setup.dark_v == calibration.dark.magnitude
    assert setup.fringe.contrast == pytest.approx(float(calibration.contrast.magnitude), rel=1e-3)
    assert setup.stated_contrast == (float(calibration.contrast.magnitude), "calibration")
