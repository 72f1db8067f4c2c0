"""Power drift taken out by a monitor or by the other port, against the simulated truth."""

import numpy as np
import pytest

from calibration.count_reading import read_count
from calibration.errors import CalibrationError
from calibration.found_extremes import Level
from calibration.power_ratio import antiphase_ratio, over_monitor, without_power_drift
from firmware_bridge.trace import Trace

COUNT = 12_000
TIME = np.linspace(0, 1, COUNT)
POWER = 1.0 + 0.35 * np.sin(3.0 * TIME) + 0.05 * np.sin(300.0 * TIME)
PHASE = 2 * np.pi * 30.3 * TIME


def port(sign, gain, dark, seed, visibility=0.8):
    rng = np.random.default_rng(seed)
    light = gain * POWER * (1.0 + sign * visibility * np.cos(PHASE))
    return dark + light + 0.003 * rng.normal(size=COUNT)


def test_a_monitor_takes_the_power_out():
    rng = np.random.default_rng(3)
    monitor = 0.2 + 2.0 * POWER + 0.002 * rng.normal(size=COUNT)
    got = over_monitor(port(1, 1.0, 0.1, 1), monitor, 0.1, 0.2)
    level = float(np.median(POWER))
    assert got == pytest.approx(0.1 + level * (1 + 0.8 * np.cos(PHASE)), abs=0.03)
    with pytest.raises(CalibrationError, match="must stay above its dark level"):
        over_monitor(port(1, 1.0, 0.1, 1), monitor, 0.1, 2.5)


@pytest.mark.parametrize("gain", [0.4, 1.0, 3.0])
def test_the_other_port_takes_the_power_out(gain):
    ratio, found = antiphase_ratio(port(1, 1.0, 0.1, 1), port(-1, 1.0 / gain, 0.1, 2), 0.1, 0.1)
    assert found == pytest.approx(gain, rel=0.02)
    # (A − gB)/(A + gB − dark) is the visibility times cos φ, whatever the power
    assert ratio == pytest.approx(0.8 * np.cos(PHASE), abs=0.04)


def test_ports_in_phase_are_refused():
    with pytest.raises(CalibrationError, match="must go down where the photodiode goes up"):
        antiphase_ratio(port(1, 1.0, 0.1, 1), port(1, 1.0, 0.1, 2))


def test_a_count_is_sound_only_without_the_drift():
    trace = Trace("pd", "V", port(1, 1.0, 0.1, 1), 1000.0)
    other = Trace("other", "V", port(-1, 0.7, 0.1, 2), 1000.0)
    assert any("uneven" in reason for reason in read_count(trace).reasons)
    even = without_power_drift(trace, antiphase=other, dark=Level(0.1))
    assert even.unit == "1"
    got = read_count(even)
    assert got.reasons == []
    assert got.count.fringes == pytest.approx(30.3, abs=0.05)
    assert float(got.high.magnitude) == pytest.approx(0.8, abs=0.01)


def test_one_or_the_other():
    trace = Trace("pd", "V", port(1, 1.0, 0.1, 1), 1000.0)
    assert without_power_drift(trace) is trace
    with pytest.raises(CalibrationError, match="one or the other"):
        without_power_drift(trace, trace, trace)
