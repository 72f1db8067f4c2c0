"""Arguments of the commands: what they stand for, and what cannot be written."""

import struct
from fractions import Fraction

import pytest
from hypothesis import given
from hypothesis import strategies as st

from firmware_bridge.arguments import (
    clear_arguments,
    line_arguments,
    phase_step,
    ramp_arguments,
    rate_arguments,
    start_arguments,
    step_frequency_hz,
)
from firmware_bridge.message_head import MessageError


@given(st.floats(1e-6, 0.499999), st.floats(1.0, 1e6))
def test_a_step_is_the_nearest_to_its_frequency(part, rate_hz):
    frequency_hz = part * rate_hz
    found = step_frequency_hz(phase_step(frequency_hz, rate_hz), rate_hz)
    assert abs(found - frequency_hz) <= rate_hz / 2**33 * 1.000001


@pytest.mark.parametrize("frequency_hz", [0.0, -1.0, 500.0, 501.0])
def test_a_frequency_beyond_half_the_rate_has_no_step(frequency_hz):
    wanted = f"frequency_hz must be > 0 Hz and < 500 Hz, half the rate, got {frequency_hz}"
    with pytest.raises(MessageError) as raised:
        phase_step(frequency_hz, 1000.0)
    assert str(raised.value) == wanted


@given(st.floats(1e-3, 4e9))
def test_a_rate_is_a_ratio_that_is_as_near_as_32_bits_allow(rate_hz):
    numerator, denominator = struct.unpack("<II", rate_arguments(rate_hz))
    assert abs(Fraction(numerator, denominator) / Fraction(rate_hz) - 1) < Fraction(1, 10**9)


@pytest.mark.parametrize("rate_hz", [1000.0, 62.5, 44100.0, 1e6, 0.25])
def test_simple_rates_are_exact(rate_hz):
    numerator, denominator = struct.unpack("<II", rate_arguments(rate_hz))
    assert Fraction(numerator, denominator) == Fraction(rate_hz)


@pytest.mark.parametrize("rate_hz", [0.0, -1.0, 2.0**32, float("nan"), float("inf")])
def test_a_rate_that_cannot_be_is_refused(rate_hz):
    with pytest.raises(MessageError, match=r"rate_hz must be ≥ 1e-9 Hz and < 2\^32 Hz"):
        rate_arguments(rate_hz)


def test_parts_of_full_scale():
    assert line_arguments(0, 1, 0.5)[2:4] == (32768).to_bytes(2, "little")
    assert line_arguments(0, 1, 1.0)[2:4] == b"\xff\xff"  # the most there is
    assert ramp_arguments(-1.0, 1)[:2] == (-32767).to_bytes(2, "little", signed=True)
    assert ramp_arguments(0.25, 1)[:2] == (8192).to_bytes(2, "little")


@pytest.mark.parametrize(
    ("call", "wanted"),
    [
        (lambda: line_arguments(0, 1, 1.1), "amplitude must be 0 to 1 of full scale, got 1.1"),
        (lambda: line_arguments(0, 1, float("nan")), "amplitude must be 0 to 1 of full scale"),
        (lambda: ramp_arguments(-1.5, 1), "target must be -1 to 1 of full scale, got -1.5"),
        (lambda: line_arguments(256, 1, 0.1), "line does not fit its field"),
        (lambda: clear_arguments(-1), "line does not fit its field"),
        (lambda: ramp_arguments(0.0, 2**32), "samples does not fit its field"),
        (lambda: start_arguments(lock_in_channel=300), "start does not fit its field"),
    ],
)
def test_what_does_not_fit_is_named(call, wanted):
    with pytest.raises(MessageError) as raised:
        call()
    assert str(raised.value).startswith(wanted)
