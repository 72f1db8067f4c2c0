"""The actuator before it is calibrated: resonance, and from terminals to the generator."""

import math

import pytest

from metro.actuator import Actuator
from metro.bench import Bench, BenchError


def actuator(**keys):
    return Actuator.of(Bench.of(actuator__gain="35 nm/V", **keys))


def test_gain_and_resonance():
    """A damped oscillator: 1 for a slow drive, Q at the resonance, r⁻² far above (any text)."""
    found = actuator(actuator__resonance="2 kHz", actuator__q=30)
    assert found.response(1.0) == pytest.approx(1.0, abs=1e-6)
    assert found.response(2000.0) == pytest.approx(30.0)
    assert found.response(40_000.0) == pytest.approx(1 / 399, rel=1e-5)
    assert found.terminals_v(35e-9 * 30, 2000.0) == pytest.approx(1.0)
    assert actuator().response(1e5) == 1.0


def test_readings():
    """Peak, peak to peak, rms of a sine; 50 Ω generators give twice the display into 1 MΩ."""
    assert actuator(drive__reading="rms").reading_v(1.0) == pytest.approx(1 / math.sqrt(2))
    assert actuator(drive__reading="peak-to-peak").reading_v(1.0) == 2.0
    amplifier = {"drive__point": "amplifier input", "drive__amplifier_gain": -20}
    assert actuator(**amplifier).reading_v(1.0) == pytest.approx(0.05)
    generator = {"drive__point": "generator setting", "drive__assumed_load": "50 ohm"}
    assert actuator(**generator).reading_v(1.0) == pytest.approx(0.5)
    matched = actuator(**generator, drive__load="50 ohm")
    assert matched.reading_v(1.0) == pytest.approx(1.0)
    assert actuator(drive__amplifier_gain=20).reading_v(1.0) == 1.0  # read behind the amplifier


def test_the_gain_is_needed():
    with pytest.raises(BenchError) as caught:
        Actuator.of(Bench())
    assert (
        str(caught.value)
        == 'the bench must give actuator.gain: write gain = "35 nm/V" under [actuator]'
    )
