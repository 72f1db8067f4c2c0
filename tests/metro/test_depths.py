"""How deep the lines may drive the fringe together."""

import math

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from metro.depths import PEAK_RAD, compressions, harmonics, largest_scale

DEPTHS = st.lists(st.floats(1e-6, 2.0), min_size=1, max_size=8)


def test_six_lines_at_0_2_rad_lose_5_4_percent():
    """2·J1(0.2)/0.2 · J0(0.2)^5 (scipy.special gives 0.94632…)."""
    special = pytest.importorskip("scipy.special")
    left = 2 * special.j1(0.2) / 0.2 * special.j0(0.2) ** 5
    assert compressions([0.2] * 6) == pytest.approx([1 - left] * 6, abs=1e-14)
    assert 1 - left == pytest.approx(0.054, abs=5e-4)


def test_against_a_sampled_fringe():
    """Lines and harmonics of cos(−π/2 + offset + Σ m cos ωt), read off its Fourier series."""
    depths, cycles, offset, n = [0.3, 0.15, 0.05], [31, 87, 141], 0.1, 4096
    t = np.arange(n) / n
    phase = sum(m * np.cos(2 * np.pi * k * t) for m, k in zip(depths, cycles, strict=True))
    spectrum = 2 / n * np.abs(np.fft.rfft(np.cos(-np.pi / 2 + offset + phase)))
    small = np.array(depths) * math.cos(offset)
    assert 1 - spectrum[cycles] / small == pytest.approx(compressions(depths), abs=1e-12)
    second, third = harmonics(depths, 0, offset)
    assert second == pytest.approx(spectrum[62] / spectrum[31], rel=1e-9)
    assert third == pytest.approx(spectrum[93] / spectrum[31], rel=1e-9)


@given(DEPTHS, st.floats(1e-4, 0.15))
def test_the_largest_scale_keeps_every_limit(depths, loss):
    drives = [10 * m for m in depths]
    limit = largest_scale(depths, drives, loss=loss, limit_v=6.0, read_v=8.0)
    scaled = [limit.scale * m for m in depths]
    at_limits = [
        max(compressions(scaled)) / loss,
        math.fsum(scaled) / PEAK_RAD,
        10 * math.fsum(scaled) / 6.0,
        10 * math.fsum(scaled) / 8.0,
    ]
    assert max(at_limits) == pytest.approx(1.0, rel=1e-6)


def test_the_limit_is_named():
    assert "takes 1 % of a line" in largest_scale([0.1], [1.0]).reason
    assert largest_scale([0.1], [1.0]).scale == pytest.approx(math.sqrt(0.08) / 0.1, rel=0.01)
    assert "the drive limit of 2 V" in largest_scale([0.1], [1.0], limit_v=2.0).reason
    assert "2 V that the converter can read" in largest_scale([0.1], [1.0], read_v=2.0).reason
    many = largest_scale([1e-3] * 60, [1.0] * 60, loss=0.15)
    assert "peaks together reach 1 rad" in many.reason


def test_no_depth_has_no_harmonics():
    assert harmonics([0.0], 0, 0.1) == (0.0, 0.0)
