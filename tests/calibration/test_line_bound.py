"""The bound of a line: the motion's density against a periodogram, the bound against simple noise."""

import numpy as np
import pytest
from scipy.signal import welch
from sessions import built_in_bench

from calibration.line_bound import line_bound
from calibration.rehearsal_script import session_steps
from firmware_bridge.simulated.bench import SimulatedBench
from firmware_bridge.simulated.motion import Component, Motion, spectral_density


@pytest.mark.parametrize(
    "part", [Component(2.0, 0.05), Component(1.0, 0.002), Component(1.5, 0.03, 120.0)]
)
def test_density_of_a_motion_is_that_of_its_samples(part):
    """Welch's method of scipy on 2^20 samples: 1023 half-overlapping segments, about 4 % each."""
    rate_hz = 1000.0
    values = Motion([part], rate_hz, np.random.default_rng(5)).block(1 << 20)
    found_hz, found = welch(values, rate_hz, nperseg=2048, detrend=False)
    for number in (20, 150, 245, 600, 900):
        expected = spectral_density([part], rate_hz, float(found_hz[number]))
        near = found[number - 2 : number + 3].mean()
        assert near == pytest.approx(expected, rel=0.1)


def test_density_adds_up_to_the_variance():
    """Parseval: the one-sided density integrated up to half the rate is the variance."""
    parts, rate_hz = [Component(2.0, 0.05), Component(1.0, 0.03, 120.0)], 1000.0
    grid = (np.arange(4000) + 0.5) / 4000 * rate_hz / 2  # midpoints, 0.125 Hz apart
    whole = sum(spectral_density(parts, rate_hz, f) for f in grid) * (grid[1] - grid[0])
    assert whole == pytest.approx(5.0, rel=1e-3)


def test_bound_falls_with_the_root_of_the_time_and_with_the_drive():
    bench = built_in_bench()
    simulated = SimulatedBench(bench, 1)
    steps = session_steps(bench, 20.0)
    once = line_bound(simulated, steps, 87.1)
    assert line_bound(simulated, session_steps(bench, 80.0), 87.1) == pytest.approx(once / 2)
    assert line_bound(simulated, steps, 31.7) < line_bound(simulated, steps[:-3], 31.7)  # again
