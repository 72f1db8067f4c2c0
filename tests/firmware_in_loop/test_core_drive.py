"""The core's drive: against cosines in double precision, at its limits, and when the host is silent."""

import numpy as np
import pytest
from firmware_core import Device, Limits

from firmware_bridge.announcement import Announcement, ChannelInfo
from firmware_bridge.arguments import (
    clear_arguments,
    line_arguments,
    phase_step,
    ramp_arguments,
    step_frequency_hz,
)
from firmware_bridge.decoder import Decoder, Reply
from firmware_bridge.frame import CommandCode, encode_command

RATE_HZ = 2000.0
REST, SPAN = 2048, 2047
LIMITS = Limits(REST, SPAN, 48, 4048, 1200)
ALIVE = encode_command(CommandCode.KEEP_ALIVE)


def board(core, limits=LIMITS, rate_hz=RATE_HZ):
    announced = Announcement(0, rate_hz, "int16", 8, [ChannelInfo("pd"), ChannelInfo("drive")])
    return Device(core, announced, limits)


def ask(device, code, arguments=b""):
    """Return the text of the refusal, empty if it is done."""
    (reply,) = [
        event
        for event in Decoder().feed(device.obey(encode_command(code, 5, arguments)))
        if isinstance(event, Reply)
    ]
    assert (reply.code, reply.request) == (code, 5)
    assert (reply.status == 2) == bool(reply.text)
    return reply.text


def set_line(device, line, frequency_hz, amplitude, phase_rad=0.0):
    step = phase_step(frequency_hz, RATE_HZ)
    return ask(device, CommandCode.SET_LINE, line_arguments(line, step, amplitude, phase_rad))


def codes(device, count):
    """The host keeps saying that it is there."""
    out = []
    for k in range(count):
        if k % 500 == 0:
            device.obey(ALIVE)
        out.append(device.step())
    return np.array(out)


def test_the_carrier_is_a_sine(core):
    rng = np.random.default_rng(1)
    phases = np.concatenate([rng.integers(0, 1 << 32, 20_000), np.arange(0, 1 << 32, 1 << 22)])
    found = np.array([core.library.pd_sin(int(phase)) for phase in phases])
    true = 16384 * np.sin(phases * (2 * np.pi / 2**32))
    assert np.abs(found - true).max() < 1.1
    assert found @ true / (true @ true) == pytest.approx(1.0, abs=2e-6)
    quarters = [core.library.pd_sin(k << 30) for k in range(4)]
    assert quarters == [0, 16384, 0, -16384]


def test_at_reset_the_drive_rests(core):
    device = board(core)
    assert [device.step() for _ in range(5000)] == [REST] * 5000


def test_several_lines_are_cosines_counted_from_sample_zero(core):
    device = board(core)
    wanted = [(31.7, 0.3, 0.4), (87.1, 0.2, -2.0), (401.3, 0.05, 3.0), (0.11, 0.1, 0.0)]
    for line, (frequency_hz, amplitude, phase_rad) in enumerate(wanted):
        assert set_line(device, line, frequency_hz, amplitude, phase_rad) == ""
    found = codes(device, 20_000)
    time_s = np.arange(20_000) / RATE_HZ
    true = sum(
        amplitude
        * np.cos(
            2 * np.pi * step_frequency_hz(phase_step(f, RATE_HZ), RATE_HZ) * time_s + phase_rad
        )
        for f, amplitude, phase_rad in wanted
    )
    error = found - (REST + SPAN * true)
    # half a code of rounding, and carriers within 1.1 / 16384
    assert np.abs(error[5:]).max() < 0.52 + 1.1 / 16384 * 0.65 * SPAN


def test_a_line_set_later_has_the_phase_it_would_have_had_from_the_start(core):
    early, late = board(core), board(core)
    set_line(early, 2, 87.1, 0.2, 1.0)
    codes(early, 1234)
    codes(late, 1234)
    set_line(late, 5, 87.1, 0.2, 1.0)
    assert np.array_equal(codes(early, 500)[5:], codes(late, 500)[5:])


def test_start_counts_the_phases_anew(core):
    device, fresh = board(core), board(core)
    for one in (device, fresh):
        set_line(one, 0, 87.1, 0.2)
    codes(device, 777)
    for one in (device, fresh):
        one.obey(encode_command(CommandCode.START))
    assert np.array_equal(codes(device, 500)[5:], codes(fresh, 500)[5:])


def test_a_cleared_line_is_gone(core):
    device = board(core)
    set_line(device, 0, 87.1, 0.2)
    set_line(device, 1, 31.7, 0.2)
    codes(device, 100)
    assert ask(device, CommandCode.CLEAR_LINE, clear_arguments(0)) == ""
    assert np.ptp(codes(device, 1000)) > 700
    assert ask(device, CommandCode.CLEAR_LINE, clear_arguments()) == ""
    assert set(codes(device, 100)[5:]) == {REST}
    assert ask(device, CommandCode.CLEAR_LINE, clear_arguments(6)) == "no such line"


def test_a_ramp_is_straight_and_ends_exactly_where_it_should(core):
    device = board(core)
    assert ask(device, CommandCode.RAMP, ramp_arguments(0.75, 3001)) == ""
    up = codes(device, 3200)
    true = REST + SPAN * 0.75 * np.minimum(np.arange(3200) / 3001, 1)
    assert np.abs(up - true).max() < 0.55
    assert device.state.drive.offset == 24576 << 15
    assert ask(device, CommandCode.RAMP, ramp_arguments(-0.75, 7)) == ""
    assert ask(device, CommandCode.RAMP, ramp_arguments(-0.75, 7000)) == ""  # thought better of
    down = codes(device, 7100)
    assert np.diff(down).max() <= 0
    assert device.state.drive.offset == -(24576 << 15)
    assert down[-1] == round(REST - SPAN * 0.75)


def test_what_the_drive_could_not_follow_is_refused_and_changes_nothing(core):
    device = board(core)
    assert set_line(device, 0, 31.7, 0.6) == ""
    assert set_line(device, 1, 31.7, 0.5) == "out of range"  # 1.1 of full scale
    assert ask(device, CommandCode.RAMP, ramp_arguments(0.4, 9000)) == "out of range"  # code 4095
    assert set_line(device, 1, 900.0, 0.3) == "too fast"
    assert ask(device, CommandCode.RAMP, ramp_arguments(0.3, 0)) == "no such ramp"
    assert set_line(device, 6, 31.7, 0.1) == "no such line"
    for step in (0, 1 << 31):
        arguments = line_arguments(1, step, 0.1)
        assert ask(device, CommandCode.SET_LINE, arguments) == "no such line"
    undisturbed = board(core)
    set_line(undisturbed, 0, 31.7, 0.6)
    assert np.array_equal(codes(device, 3000), codes(undisturbed, 3000))


def test_what_is_accepted_never_meets_the_limits(core):
    """Whatever is accepted comes out as asked for: no limit acts, at any time."""
    rng = np.random.default_rng(12)
    accepted = 0
    for _ in range(150):
        slew = int(rng.integers(5, 1500))
        device = board(core, Limits(REST, SPAN, 48, 4048, slew))
        lines = []
        for line in range(rng.integers(1, 7)):
            wanted = (
                float(rng.uniform(0.1, 990)),
                float(rng.uniform(0, 0.6)),
                float(rng.uniform(-3, 3)),
            )
            if not set_line(device, line, *wanted):
                lines.append(wanted)
        accepted += len(lines)
        codes(device, 2000)  # the way there may be limited
        n = np.arange(2000, 3500)
        phases = [phase_step(f, RATE_HZ) * n * (2 * np.pi / 2**32) + p for f, _, p in lines]
        true = REST + SPAN * sum(
            (a * np.cos(x) for (_, a, _), x in zip(lines, phases, strict=True)), 0 * n
        )
        assert np.abs(codes(device, 1500) - true).max() < 0.7
    assert accepted > 100


def test_range_and_slew_hold_on_the_way_too(core):
    rng = np.random.default_rng(13)
    device = board(core, Limits(REST, SPAN, 700, 3000, 40))
    found = []
    for _ in range(300):
        set_line(
            device,
            int(rng.integers(0, 6)),
            float(rng.uniform(0.1, 500)),
            float(rng.uniform(0, 0.5)),
        )
        ask(
            device,
            CommandCode.RAMP,
            ramp_arguments(float(rng.uniform(-1, 1)), int(rng.integers(1, 300))),
        )
        if rng.random() < 0.3:
            ask(device, CommandCode.CLEAR_LINE, clear_arguments())
        found += list(codes(device, 50))
    assert min(found) >= 700
    assert max(found) <= 3000
    assert np.abs(np.diff(found)).max() == 40


@pytest.mark.parametrize("offset", [-(1 << 30), 1 << 30])
def test_the_limits_hold_even_where_nothing_was_checked(core, offset):
    device = board(core, Limits(REST, SPAN, 700, 3000, 40))
    device.state.drive.offset = offset
    found = codes(device, 100)
    assert np.abs(np.diff(found)).max() == 40
    assert found[-1] == (3000 if offset > 0 else 700)


@pytest.mark.parametrize("rate_hz", [10.0, 200.0, 2000.0, 10_000.0])
def test_when_the_host_is_silent_the_drive_rests_within_2_1_s(core, rate_hz):
    device = board(core, rate_hz=rate_hz)
    step = phase_step(0.05 * rate_hz, rate_hz)
    ask(device, CommandCode.RAMP, ramp_arguments(0.3, 2))
    ask(device, CommandCode.SET_LINE, line_arguments(0, step, 0.4, 0.3))
    found = np.array([device.step() for _ in range(int(4 * rate_hz))])
    moving = np.flatnonzero(found != REST)
    assert 1.9 * rate_hz <= moving[-1] < 2.1 * rate_hz
    if rate_hz >= 2000:  # no jump beyond what line and ramp down make
        slope = 2 * np.pi * 0.05 * 0.4 * SPAN + SPAN / (rate_hz / 20) + 2
        assert np.abs(np.diff(found[3:])).max() < slope
    # and it stays there until it is told otherwise
    device.obey(ALIVE)
    assert [device.step() for _ in range(100)] == [REST] * 100
    assert ask(device, CommandCode.SET_LINE, line_arguments(0, step, 0.4)) == ""
    assert np.ptp([device.step() for _ in range(100)]) > 1000


def test_a_host_that_comes_back_on_the_way_to_rest_is_told_so(core):
    device = board(core)
    set_line(device, 0, 31.7, 0.4)
    for _ in range(4010):
        device.step()
    assert set_line(device, 1, 87.1, 0.1) == "going to rest"
    assert set(codes(device, 1000)[100:]) == {REST}
    assert set_line(device, 1, 87.1, 0.1) == ""


def test_a_drive_that_can_only_push_rests_at_its_end(core):
    """As on a DAC whose zero is 0 V: first an offset, then a line."""
    device = board(core, Limits(0, 4095, 0, 4095, 4095))
    assert set_line(device, 0, 31.7, 0.2) == "out of range"
    assert ask(device, CommandCode.RAMP, ramp_arguments(0.5, 100)) == ""
    assert set_line(device, 0, 31.7, 0.2) == "out of range"  # not there yet
    codes(device, 101)
    assert set_line(device, 0, 31.7, 0.2) == ""
    found = codes(device, 2000)[5:]
    assert found.min() == pytest.approx(4095 * 0.3, abs=1)
    assert found.max() == pytest.approx(4095 * 0.7, abs=1)
