"""The noise expected in a spectrum: the bench's sources in every quantity, as a recording shows them."""

import numpy as np
import pytest

from calibration.expected_noise import bench_as_measured, expected_noise
from firmware_bridge.channel import Channel
from metro.bench import Bench
from metro.bench_entry import MotionPoint
from metro.sensitivity import displacement_noise

FREQUENCY = np.linspace(0.0, 1000.0, 201)


def _bench(**more):
    from dataclasses import replace

    motion = more.pop("motion", ())
    values = {
        "laser.wavelength": "632.9908 nm", "arms.length": "0.42 m", "fringe.low": "0.5 V",
        "fringe.high": "2.5 V", "adc.noise": "1 mV", "adc.rate": "2 kHz",
    }  # fmt: skip
    return replace(Bench().override(values | more), motion=motion)


def test_the_converter_is_white_in_volts_and_in_metres():
    # 1 mV over 1 kHz; the slope at mid-fringe is 1 V · 4π/λ.
    level = 1e-3 / np.sqrt(1000.0)
    slope = 1.0 * 4 * np.pi / 632.9908e-9
    for quantity, factor in (
        ("voltage", 1.0), ("displacement", 1 / slope), ("strain", 1 / slope / 0.42),
        ("phase", 1.0 / 1.0),
    ):  # fmt: skip
        found = expected_noise(_bench(), quantity, FREQUENCY)
        np.testing.assert_allclose(found.density, level * factor, rtol=1e-6)
        assert list(found.sources) == ["adc"]
        assert "shot" in found.missing


def test_what_filters_take_away_is_taken_from_motion_and_not_from_the_converter():
    # A first-order pole at 400 Hz: 1/√2 of what moves is left there.
    bench = _bench(
        **{"adc.antialias": "400 Hz"}, motion=(MotionPoint(1.0, 1e-9), MotionPoint(1000.0, 1e-12))
    )
    frequency = np.linspace(0.0, 1000.0, 1001)
    found = expected_noise(bench, "displacement", frequency)
    np.testing.assert_allclose(found.sources["adc"], found.sources["adc"][0], rtol=1e-3)
    at = float(found.sources["motion"][400])
    assert at == pytest.approx(1e-9 / 400 / np.sqrt(2), rel=0.02)
    undone = expected_noise(bench, "displacement", frequency, undone=True)
    assert float(undone.sources["motion"][400]) == pytest.approx(1e-9 / 400, rel=2e-3)
    lifted = undone.sources["adc"] / found.sources["adc"]
    assert float(lifted[400]) == pytest.approx(np.sqrt(2), rel=0.02)
    both = np.hypot(found.sources["adc"], found.sources["motion"])
    np.testing.assert_allclose(found.density, both, rtol=3e-3)
    assert "stated from 1 Hz to 1000 Hz" in found.remarks[-1]


def test_at_low_frequency_it_is_what_expect_prints():
    values = {
        "photodiode.responsivity": "0.41 A/W", "photodiode.transimpedance": "62 kohm",
        "laser.power": "80 uW",
    }  # fmt: skip
    bench = _bench(**values)
    found = expected_noise(bench, "displacement", FREQUENCY)
    exact = displacement_noise(bench.chain(), 5.0)
    assert found.density[1] == pytest.approx(exact.total, rel=1e-6)
    assert set(found.sources) == {name for name, value in exact.densities.items() if value}


def test_nothing_known_is_nothing_expected():
    assert expected_noise(Bench(), "displacement", FREQUENCY) is None


def test_rounding_to_counts_is_the_noise_where_nothing_else_is_known():
    counts = Channel("pd", "V", 1e-3)
    bench = bench_as_measured(Bench(), 2000.0, counts, None)
    assert bench.magnitude("adc.noise") == pytest.approx(1e-3 / np.sqrt(12))
    assert bench.magnitude("adc.rate") == 2000.0
    stated = bench_as_measured(_bench(), 4000.0, counts, None)
    assert stated.magnitude("adc.noise") == 1e-3
    assert stated.magnitude("adc.rate") == 4000.0
