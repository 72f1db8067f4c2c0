"""The floor: what the bench's stated u leave, term by term."""

import math

import numpy as np
import pytest

from metro.bench import Bench
from metro.bench_entry import BenchLine
from metro.floor import floor_of, is_drive_read
from metro.measured import Measured

LINE = BenchLine(100.0, 0.2, 0.001)


def bench(**keys):
    base = {
        "laser__wavelength": {"value": "633 nm", "u": "0.0633 nm"},
        "air__medium": "vacuum",
        "fringe__drift": {"value": 0, "u": "0.03%"},
    }
    return Bench.of(**{**base, **keys})


def effects(bench, swing_v=None, line=LINE):
    return {c.name: c.effect for c in floor_of(bench, line, swing_v).budget.contributions}


def test_terms_that_are_stated():
    found = effects(
        bench(
            drive__divider={"value": 10, "u": 0.015},
            adc__reference={"value": 0, "u": "0.15%"},
            photodiode__bandwidth={"value": "1 kHz", "u": "100 Hz"},
            fringe__low={"value": "1 V", "u": "3 mV"},
            fringe__high={"value": "6 V", "u": "4 mV"},
        )
    )
    assert found == pytest.approx(
        {
            "laser wavelength": 1e-4,
            "drive reading": 1.5e-3,
            "ADC reference": 1.5e-3,
            "fringe extremes": 1e-3,
            "power drift between recordings": 3e-4,
            "readout response": 0.01 / 1.01 * 0.1,  # r²/(1+r²)·u/f₀, r = 0.1
        }
    )


def test_the_root_of_the_sum_of_squares_and_the_largest():
    floor = floor_of(bench(drive__divider={"value": 10, "u": 0.04}), LINE)
    assert floor.relative_u == pytest.approx(math.hypot(1e-4, 4e-3, 3e-4))
    assert floor.largest.name == "drive reading"
    assert floor.unstated == ("adc.reference",)


def test_air():
    index = Measured.of(1.00027, "1", 1e-6)
    found = effects(bench(air__medium="air").replace({"air.index": index}))
    assert found["refractive index"] == pytest.approx(-1e-6, rel=1e-3)


def test_a_generators_setting_is_taken_as_the_bench_states_it():
    generator = bench(
        drive__point="generator setting",
        drive__amplifier_gain={"value": 20, "u": 0.1},
        adc__reference={"value": 0, "u": "0.15%"},
    )
    assert not is_drive_read(generator)
    found = effects(generator)
    assert found["drive setting"] == pytest.approx(-5e-3)
    assert found["drive amplifier"] == pytest.approx(-5e-3)
    assert "ADC reference" not in found
    recorded = generator.override({"drive.channel": "2"})
    assert is_drive_read(recorded)
    assert "ADC reference" in effects(recorded)


def test_drift_is_assumed_where_not_stated():
    floor = floor_of(Bench.of(wavelength="633 nm"), LINE)
    assert floor.relative_u == pytest.approx(0.002 / math.sqrt(3))
    assert floor.unstated == ("laser.wavelength", "drive.divider", "adc.reference", "fringe.drift")


@pytest.mark.parametrize("point", ["actuator terminals", "generator setting"])
@pytest.mark.parametrize("mid_v", [0.0, 1.3])
def test_curvature_against_a_bent_fringe(point, mid_v):
    """Read a small line and the extremes through a bent converter, and compare with the formula."""
    swing_v, half_v, bend = 1.9, 5.0, 1e-5

    def read(volts):
        x = volts / half_v
        return volts + 2 * half_v * bend * (x**3 - x)

    high, low = read(mid_v + swing_v), read(mid_v - swing_v)
    small = 1e-3
    line = read(mid_v + small) - read(mid_v - small)
    drive = read(small) - read(-small) if point == "actuator terminals" else 2 * small
    seen = line / (0.5 * (high - low)) / drive
    exact = 1.0 / swing_v
    keys = {"adc__cubic": {"value": 0, "u": bend}, "adc__range": "10 V", "drive__point": point}
    found = effects(bench(**keys), swing_v)["ADC curvature (cubic)"]
    assert found == pytest.approx(seen / exact - 1.0, rel=1e-3)
    assert np.sign(found) == (1 if point == "actuator terminals" else -1)
