"""The whole board on the emulator, from a trace, every byte known beforehand."""

import numpy as np
import pytest
from firmware_core import Device, Limits
from firmware_emulator import build, play, trace

from firmware_bridge.announcement import Announcement, ChannelInfo, encode_announcement
from firmware_bridge.arguments import line_arguments, phase_step, ramp_arguments, rate_arguments
from firmware_bridge.decoder import Decoder, Samples
from firmware_bridge.frame import (
    CommandCode,
    Reply,
    encode_command,
    encode_frame,
    encode_reply,
    encode_stream,
)

pytestmark = pytest.mark.firmware

SEED, SLOTS, TICKS_PER_SAMPLE = 77, 50, 25_000


def announced(stream):
    channels = [
        ChannelInfo("photodiode", "V", 2.0**-11, 0.0, -2048, 2047),
        ChannelInfo("drive", "V", 2.0**-10, 0.0, -2048, 2047),
    ]
    return Announcement(
        stream, 1000.0, "int16", SLOTS, channels, "midfringe on emulated MPS2", "1.0",
        simulated=True, clock_hz=25_000_000,
    )  # fmt: skip


@pytest.fixture(scope="module")
def elf(tmp_path_factory):
    return build(tmp_path_factory.mktemp("mps2"))


@pytest.fixture
def samples():
    return np.random.default_rng(5).integers(-2047, 2047, 10_000).astype(np.int16)


def test_ten_seconds_are_what_the_python_codec_says_byte_for_byte(elf, tmp_path, samples):
    commands = [
        (0, encode_command(CommandCode.IDENTIFY, 1) + encode_command(CommandCode.START, 2)),
        (9_990, encode_command(CommandCode.STOP, 3)),
    ]
    sent = play(elf, trace(samples, commands, ticks=10_010, seed=SEED), tmp_path)
    scans = np.stack([samples, np.zeros_like(samples)], axis=1)
    expected = encode_announcement(announced(SEED))
    expected += encode_announcement(announced(SEED + 1))
    expected += encode_reply(Reply(CommandCode.START, 2))
    expected += encode_stream(
        scans[:9_950], slots=SLOTS, stream=SEED + 1, ticks_per_sample=TICKS_PER_SAMPLE
    )
    expected += encode_reply(Reply(CommandCode.STOP, 3))
    expected += encode_frame(
        scans[9_950:9_990],
        index=9_950,
        sequence=199,
        stream=SEED + 1,
        clock=9_950 * TICKS_PER_SAMPLE,
        slots=SLOTS,
    )
    assert sent == expected


def test_every_run_is_the_same(elf, tmp_path, samples):
    data = trace(samples, [(0, encode_command(CommandCode.START))], ticks=3_000, seed=1)
    assert play(elf, data, tmp_path) == play(elf, data, tmp_path)


def asked():
    """A minute's work of a host that drives, then says nothing more."""
    lines = [(0, 31.7, 0.3, 1.0), (3, 87.1, 0.25, -0.5)]
    wire = b"".join(
        encode_command(CommandCode.SET_LINE, line, line_arguments(line, phase_step(f, 1000), a, p))
        for line, f, a, p in lines
    )
    ramp = encode_command(CommandCode.RAMP, 5, ramp_arguments(0.3, 1500))
    alive = [(tick, encode_command(CommandCode.KEEP_ALIVE)) for tick in range(700, 4_900, 700)]
    return [
        (0, encode_command(CommandCode.RATE, 1, rate_arguments(1000))),
        (3, encode_command(CommandCode.START, 2)),
        (500, wire),
        (620, ramp),
        *alive,
    ]


def test_the_drive_rests_within_2_1_s_of_the_hosts_silence(core, elf, tmp_path, samples):
    """And until then, and on the way, every code is that of the core on this machine."""
    commands = asked()
    sent = play(elf, trace(samples, commands, ticks=8_000, seed=SEED), tmp_path)
    device = Device(core, announced(0), Limits(2048, 2047, 48, 4048, 1500), blocks=32, seed=SEED)
    device.board.set_rate = type(device.board.set_rate)(nearest_reload)
    expected = b""
    for tick in range(8_000):
        for at, wire in commands:
            if at == tick:
                expected += device.obey(wire)
        index = device.state.index
        expected += device.sample(int(samples[index]), tick * TICKS_PER_SAMPLE)
    assert sent == expected
    frames = [event for event in Decoder().feed(sent) if isinstance(event, Samples)]
    drive = np.concatenate([frame.data[:, 1] for frame in frames])
    heard = commands[-1][0] - 3  # index 0 is tick 3
    moving = np.flatnonzero(drive)
    assert 2_000 <= moving[-1] - heard < 2_100
    assert np.ptp(drive[heard : heard + 2_000]) > 1_800


def nearest_reload(rate):
    rate.contents.denominator = 25_000_000 // (rate.contents.numerator // rate.contents.denominator)
    rate.contents.numerator = 25_000_000
    return True
