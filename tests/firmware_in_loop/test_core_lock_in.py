"""The core's lock-in: sums that numpy gets too, and phasors that a slow link can carry."""

import numpy as np
import pytest
from firmware_core import Device, Limits

from firmware_bridge.announcement import FORMATS, Announcement, ChannelInfo
from firmware_bridge.arguments import line_arguments, phase_step, start_arguments
from firmware_bridge.decoder import Decoder, LockIn, Samples
from firmware_bridge.frame import CommandCode, encode_command
from firmware_bridge.message import encode_lock_in

RATE_HZ = 1000.0
FREQUENCIES_HZ = (31.7, 87.1, 401.3)
STEPS = [phase_step(f, RATE_HZ) for f in FREQUENCIES_HZ]


def board(core, name):
    announced = Announcement(0, RATE_HZ, name, 50, [ChannelInfo("pd"), ChannelInfo("drive")])
    return Device(core, announced, Limits(2048, 2047, 0, 4095, 4095))


def start(device, length, *, samples=False, channel=0):
    arguments = start_arguments(samples=samples, lock_in_channel=channel, lock_in_length=length)
    device.obey(encode_command(CommandCode.START, 1, arguments))
    for line, step in enumerate(STEPS):
        device.obey(encode_command(CommandCode.SET_LINE, 2, line_arguments(2 * line, step, 0.0)))


def results(device, samples, channel=0):
    wire = b""
    for k, sample in enumerate(samples):
        if k % 1000 == 0:
            device.obey(encode_command(CommandCode.KEEP_ALIVE))
        device.step((sample, 0) if channel == 0 else (0, sample))
        wire += device.drain()
    return wire


def carriers(core, index, length):
    n = np.arange(index, index + length)
    phases = [(n * step) & 0xFFFFFFFF for step in STEPS]
    sines = [np.array([core.library.pd_sin(int(p)) for p in phase]) for phase in phases]
    quarter = [(phase + (1 << 30)) & 0xFFFFFFFF for phase in phases]
    cosines = [np.array([core.library.pd_sin(int(p)) for p in phase]) for phase in quarter]
    return cosines, sines


@pytest.mark.parametrize("name", list(FORMATS))
def test_sums_are_exact_and_their_message_is_the_codecs(core, name):
    rng = np.random.default_rng(3)
    half = 1 << (8 * FORMATS[name] - 1)
    samples = [int(x) for x in rng.integers(-half, half, 900)]
    samples[:4] = [-half, half - 1, -half, -half]
    device = board(core, name)
    start(device, 300, channel=1)
    wire = results(device, samples, channel=1)
    expected = b""
    for index in range(0, 900, 300):
        cosines, sines = carriers(core, index, 300)
        block = np.array(samples[index : index + 300], object)
        lines = tuple(
            (step, int(block @ c.astype(object)), int(block @ s.astype(object)))
            for step, c, s in zip(STEPS, cosines, sines, strict=True)
        )
        expected += encode_lock_in(LockIn(1, index, 300, 1, 14, lines))
    assert wire == expected


def test_the_phasor_of_each_line_comes_back(core):
    n = np.arange(20_000)
    truth = [1000 * np.exp(0.5j), 30 * np.exp(-2j), 200 * np.exp(3j)]
    signal = sum(
        np.abs(z) * np.cos(2 * np.pi * step / 2**32 * n + np.angle(z))
        for z, step in zip(truth, STEPS, strict=True)
    )
    device = board(core, "int16")
    start(device, 10_000)
    found = Decoder().feed(results(device, [int(x) for x in np.rint(signal)]))
    assert [(type(r), r.index, r.length) for r in found] == [
        (LockIn, 0, 10_000),
        (LockIn, 10_000, 10_000),
    ]
    for result in found:
        for (_step, cosine, sine), z in zip(result.lines, truth, strict=True):
            phasor = 2 * (cosine - 1j * sine) / 2**result.shift / result.length
            # what the other lines leak into 10 s, and a carrier true to 1e-6 with steps of 2^-14
            assert phasor == pytest.approx(z, abs=1.0)


def test_samples_and_results_can_be_sent_together(core):
    device = board(core, "int16")
    start(device, 200, samples=True)
    found = Decoder().feed(results(device, [7] * 400))
    assert sum(isinstance(event, LockIn) for event in found) == 2
    assert sum(len(event.data) for event in found if isinstance(event, Samples)) == 400


def test_a_result_that_is_not_fetched_in_time_is_missing_by_its_index(core):
    device = board(core, "int16")
    start(device, 100)
    for _ in range(350):
        device.step((1, 0))
    found = Decoder().feed(device.drain())
    found += Decoder().feed(results(device, [1] * 150))
    assert [event.index for event in found] == [0, 300, 400]


def test_when_the_lines_change_accumulation_begins_anew(core):
    device = board(core, "int16")
    start(device, 100)
    results(device, [5] * 60)
    device.obey(encode_command(CommandCode.SET_LINE, 3, line_arguments(5, STEPS[0], 0.0)))
    (event,) = Decoder().feed(results(device, [5] * 100))
    assert (event.index, event.length, len(event.lines)) == (60, 100, 4)


def test_a_result_never_spans_a_missing_sample(core):
    device = board(core, "int16")
    start(device, 100)
    results(device, [5] * 60)
    device.miss()
    (event,) = Decoder().feed(results(device, [5] * 100))
    assert (event.index, event.length) == (61, 100)


def test_sums_that_could_overflow_are_refused(core):
    for name, most in (("int16", 2**32 - 1), ("int24", 2**26 - 1), ("int32", 2**18 - 1)):
        for length, status in ((most, 0), (most + 1, 2), (0, 2)):
            if length < 2**32:
                device = board(core, name)
                arguments = start_arguments(lock_in_channel=0, lock_in_length=length)
                answer = device.obey(encode_command(CommandCode.START, 1, arguments))
                assert Decoder().feed(answer)[-1].status == status, (name, length)
