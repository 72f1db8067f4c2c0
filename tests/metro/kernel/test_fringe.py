"""The fringe law and its inverse: conversions, branches, harmonics, many lines at once."""

import math

import numpy as np
import pytest
import strategies as values
from hypothesis import given
from hypothesis import strategies as st
from published import close, published, records

from metro.kernel import contrast as contrast_kernel
from metro.kernel import fringe
from metro.kernel import lines as lines_kernel
from metro.kernel import phase as phase_kernel


@published("fringe", "conv.")
def test_published_conversions(record):
    x, wavelength = record["inputs"]["x_m"], record["inputs"]["lambda_nm"] * 1e-9
    assert [phase_kernel.phase_rad(x, wavelength), phase_kernel.fringes(x, wavelength)] == close(
        record
    )


def test_published_contrast():
    record = records("fringe")["mep.contrast.001"]
    assert contrast_kernel.contrast_of_powers(1.0, 0.001) == close(record)


def test_contrast_of_extremes():
    assert contrast_kernel.contrast(1.0, 3.0) == 0.5
    assert contrast_kernel.contrast(1.5, 3.5, 0.5) == 0.5


@given(values.displacement_m, values.wavelength_m, values.index, values.round_trips)
def test_displacement_is_the_inverse_of_phase(x, wavelength, n, trips):
    phase = phase_kernel.phase_rad(x, wavelength, n, trips)
    assert phase_kernel.displacement_m(phase, wavelength, n, trips) == pytest.approx(x, rel=1e-15)
    assert phase_kernel.fringes(x, wavelength, n, trips) == pytest.approx(
        phase / (2 * math.pi), rel=1e-15
    )


@given(values.wavelength_m, values.index, values.round_trips)
def test_half_a_wavelength_is_one_fringe(wavelength, n, trips):
    assert phase_kernel.fringes(
        wavelength / (2 * n * trips), wavelength, n, trips
    ) == pytest.approx(1.0, rel=1e-15)


@given(values.displacement_m, values.wavelength_m)
def test_reversing_the_motion_reverses_the_phase(x, wavelength):
    assert phase_kernel.phase_rad(-x, wavelength) == -phase_kernel.phase_rad(x, wavelength)


@given(st.floats(-20.0, 20.0), values.extremes_v)
def test_fringe_law_and_slope(phase, extremes):
    low, high = extremes
    signal = fringe.voltage(phase, low, high)
    assert low - 1e-12 <= signal <= high + 1e-12
    step = 1e-6
    numeric = (
        fringe.voltage(phase + step, low, high) - fringe.voltage(phase - step, low, high)
    ) / (2 * step)
    assert fringe.voltage_slope(phase, low, high) == pytest.approx(numeric, abs=1e-8)


@given(st.floats(0.0, math.pi), values.extremes_v)
def test_inverse_on_a_named_slope(phase, extremes):
    low, high = extremes
    falling = fringe.voltage(phase, low, high)
    if not low <= falling <= high:
        return  # rounding put an extreme a digit outside
    # near an extreme a digit of the signal is the square root of a digit of phase
    tolerance = 1e-15 * max(abs(low), abs(high)) / (high - low) / max(math.sin(phase), 1e-7) + 1e-14
    tolerance = min(max(tolerance, 1e-14), 1e-6)
    assert fringe.phase_of_voltage(falling, low, high, rising=False) == pytest.approx(
        phase, abs=4 * tolerance
    )
    assert fringe.phase_of_voltage(falling, low, high) == pytest.approx(-phase, abs=4 * tolerance)
    assert fringe.voltage_slope(-phase, low, high) >= 0.0


def test_inverse_refuses_a_signal_outside():
    with pytest.raises(
        ValueError, match=r"signal must lie between the extremes 1.0 and 2.0, got 2.5"
    ):
        fringe.phase_of_voltage(2.5, 1.0, 2.0)
    with pytest.raises(ValueError, match=r"signal must stay within the extremes, -1 … 1, got 1.5"):
        fringe.phase_change(1.5, -math.pi / 2)


@given(values.working_phase_rad, st.floats(-12, -1))
def test_change_of_phase_is_recovered_however_small(working_phase, exponent):
    for change in (10.0**exponent, -(10.0**exponent)):
        seen = fringe.signal_change(change, working_phase)
        assert seen == pytest.approx(
            -math.sin(working_phase) * change, rel=2 * 10.0**exponent + 1e-12
        )
        assert fringe.phase_change(seen, working_phase) == pytest.approx(change, rel=1e-13)


def test_change_at_an_extreme_is_of_second_order():
    assert fringe.signal_change(1e-3, 0.0) == pytest.approx(-0.5e-6, rel=1e-6)
    assert fringe.phase_change(0.0, 0.0) == 0.0


@given(values.contrast, st.floats(-10, 10))
def test_power_is_conserved_over_the_two_ports(contrast, phase):
    here, there = (contrast_kernel.power_w(p, 1e-4, contrast) for p in (phase, phase + math.pi))
    assert here + there == pytest.approx(2e-4, rel=1e-14)


def test_six_lines_at_a_fifth_of_a_radian_lose_5_4_percent():
    """S = 2J1(m)/m·J0(m)⁵ at mid-fringe; DESIGN's figure, recomputed with scipy."""
    special = pytest.importorskip("scipy.special")
    expected = 2 * special.j1(0.2) / 0.2 * special.j0(0.2) ** 5
    found = lines_kernel.line_responses([0.2] * 6, math.pi / 2)
    assert found == pytest.approx([expected] * 6, rel=1e-14)
    assert 1 - found[0] == pytest.approx(0.054, abs=5e-4)


@given(st.lists(values.depth_rad, min_size=1, max_size=4), st.floats(-3, 3), st.floats(0, 1))
def test_line_responses_scale_with_working_point_and_background(depths, phase, background):
    bare = lines_kernel.line_responses(depths, math.pi / 2)
    common = math.sin(phase) * math.exp(-background * background / 2)
    found = lines_kernel.line_responses(depths, phase, background)
    assert found == pytest.approx([common * b for b in bare], rel=1e-12, abs=1e-15)


@pytest.mark.parametrize("working_phase", [-math.pi / 2, 0.7, 2.9])
def test_lines_and_harmonics_of_a_synthetic_record(working_phase):
    """Two lines driven over whole periods, read back by projection on their carriers."""
    t = np.arange(4096) / 4096
    depths, cycles = [0.8, 0.3], [37, 101]
    phase = working_phase + sum(
        m * np.cos(2 * np.pi * c * t) for m, c in zip(depths, cycles, strict=True)
    )
    signal = np.cos(phase)
    responses = lines_kernel.line_responses(depths, working_phase)
    for m, c, response in zip(depths, cycles, responses, strict=True):
        seen = 2 * np.mean(signal * np.cos(2 * np.pi * c * t))
        assert seen == pytest.approx(-response * m, abs=1e-12)
    alone = np.cos(working_phase + 0.8 * np.cos(2 * np.pi * 37 * t))
    for order in (1, 2, 3, 4, 5):
        seen = 2 * np.mean(alone * np.cos(2 * np.pi * 37 * order * t))
        assert seen == pytest.approx(
            lines_kernel.harmonic_amplitude(order, 0.8, working_phase), abs=1e-12
        )
