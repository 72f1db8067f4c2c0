"""The fringe's shape: harmonics of its law per direction, and what they are put down to."""

import numpy as np
import pytest

from calibration.count_reading import read_count
from firmware_bridge.trace import Trace

COUNT, RATE_HZ = 40_000, 2000.0
TIME = np.arange(COUNT) / RATE_HZ


def scanned(law, seed=0, drive=None, noise=0.004):
    """Return a scan up and down over 20 fringes with a given law V(φ)."""
    rng = np.random.default_rng(seed)
    drive = np.abs((np.linspace(0, 2, COUNT) + 1) % 2 - 1) if drive is None else drive
    volts = law(2 * np.pi * 20.3 * drive + 0.7) + noise * rng.normal(size=COUNT)
    return read_count(Trace("pd", "V", volts, RATE_HZ), Trace("drive", "V", drive, RATE_HZ))


def test_a_cosine_is_one_in_both_directions():
    got = scanned(lambda phase: 2 + np.cos(phase))
    assert got.reasons == []
    assert [one.direction for one in got.shape.directions] == ["up", "down"]
    for one in got.shape.directions:
        for name in ("second", "third", "lean"):
            assert abs(getattr(one, name)) < max(4 * getattr(one, f"{name}_u"), 0.002)
    assert len(got.shape.fringes) > 40


def test_harmonics_are_found_per_direction_and_per_fringe():
    law = lambda p: 2 + np.cos(p) + 0.03 * np.cos(2 * p) - 0.02 * np.cos(3 * p)  # noqa: E731
    got = scanned(law)
    for one in got.shape.directions:
        assert one.second == pytest.approx(0.03, abs=0.004)
        assert one.third == pytest.approx(-0.02, abs=0.004)
    middle = np.median(got.shape.fringes[:, 2:4], axis=0)
    assert middle == pytest.approx([0.03, -0.02], abs=0.005)
    assert any("no cosine" in reason and "ghost beam" in reason for reason in got.reasons)


def test_saturation_is_named():
    # a detector that saturates: the top is flattened, cos 2φ below zero
    got = scanned(lambda phase: np.tanh(0.9 * (1.1 + np.cos(phase))))
    assert any("saturation" in reason for reason in got.reasons)
    assert all(one.second < -0.02 for one in got.shape.directions)


def test_feedback_leans_in_phase_and_a_slow_detector_in_time():
    leaning = scanned(lambda phase: 2 + np.cos(phase + 0.08 * np.cos(phase)))
    up, down = leaning.shape.directions
    assert up.lean * down.lean < 0
    assert any("feedback into the laser" in reason for reason in leaning.reasons)

    drive = np.abs((np.linspace(0, 2, COUNT) + 1) % 2 - 1)
    volts = 2 + np.cos(2 * np.pi * 20.3 * drive + 0.7)
    volts = volts + 0.05 * np.sin(2 * (2 * np.pi * 20.3 * drive + 0.7)) * np.where(
        TIME[-1] / 2 > TIME, 1, -1
    )
    slow = read_count(Trace("pd", "V", volts, RATE_HZ), Trace("drive", "V", drive, RATE_HZ))
    up, down = slow.shape.directions
    assert up.lean * down.lean > 0
    assert any("slow detector" in reason for reason in slow.reasons)


def test_clipping_and_a_mode_hop_are_named():
    clipped = scanned(lambda phase: np.minimum(2 + np.cos(phase), 2.8), noise=0.0)
    assert any("is clipped" in reason for reason in clipped.reasons)
    power = np.where(TIME < 6.1, 1.0, 1.12)  # a mode hop changes the power at once
    drive = np.linspace(0, 1, COUNT)
    hopped = scanned(lambda phase: power * (2 + np.cos(phase)), drive=drive)
    assert any("mode hop" in reason for reason in hopped.reasons)


def test_without_a_drive_the_direction_is_unknown():
    rng = np.random.default_rng(1)
    volts = 2 + np.cos(2 * np.pi * 20.3 * np.linspace(0, 1, COUNT)) + 0.004 * rng.normal(size=COUNT)
    got = read_count(Trace("pd", "V", volts, RATE_HZ))
    assert [one.direction for one in got.shape.directions] == ["unknown"]
    assert got.direction.startswith("unknown")
    assert got.to_dict()["net_fringes"] is None


@pytest.mark.slow
def test_the_law_of_a_shaken_scan_is_a_cosine_within_its_u():
    # eight seconds of a triangle over five fringes, shaken slowly: a dozen stretches a direction
    count, rate_hz = 32_000, 4000.0
    drive = 2 * np.abs((np.linspace(0, 4, count) + 1.5) % 2 - 1) - 1
    low_pass = 1 / (1 + (np.fft.rfftfreq(count, 1 / rate_hz) / 5) ** 2)
    for seed in range(8):
        rng = np.random.default_rng(seed)
        phase = 2 * np.pi * 2.37 * drive + rng.uniform(0, 2 * np.pi)
        shaken = np.fft.irfft(np.fft.rfft(rng.normal(size=count)) * low_pass, count)
        phase += 0.06 * shaken / shaken.std()
        values = 2 + 1.9 * np.cos(phase) + 0.003 * rng.normal(size=count)
        shape = read_count(
            Trace("pd", "V", values, rate_hz), Trace("drive", "V", drive, rate_hz)
        ).shape
        assert shape is not None
        assert shape.causes == []
        for one in shape.directions:
            assert abs(one.lean) < 3 * one.lean_u, (seed, one)
            assert abs(one.second) < 3 * one.second_u, (seed, one)
