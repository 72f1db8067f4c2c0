"""The core's ring: a slow link loses samples, and the frames say exactly which."""

import numpy as np
import pytest
from firmware_core import Device, Limits

from firmware_bridge.announcement import Announcement, ChannelInfo
from firmware_bridge.decoder import Decoder, Gap, Samples
from firmware_bridge.frame import OVER_RANGE, OVERRUN, CommandCode, encode_command

CHANNELS = [ChannelInfo("pd", "V"), ChannelInfo("drive", "V")]
LIMITS = Limits(2048, 2047, 0, 4095, 4095)
START, STOP = encode_command(CommandCode.START), encode_command(CommandCode.STOP)


def board(core, name="int16", slots=8, blocks=4, rate_hz=1000.0):
    announced = Announcement(0, rate_hz, name, slots, CHANNELS, board="ring")
    return Device(core, announced, LIMITS, blocks=blocks)


def scan(index):
    """Samples that say their own index."""
    return index % 32768, -(index // 32768)


@pytest.mark.parametrize("name", ["int16", "int24", "int32"])
def test_a_link_that_keeps_up_loses_nothing(core, name):
    device, decoder, found = board(core, name), Decoder(), []
    device.obey(START)
    for k in range(1000):
        device.step(scan(k), clock=10 * k)
        found += decoder.feed(device.drain())
    device.obey(STOP)
    found += decoder.feed(device.drain())
    assert all(isinstance(event, Samples) for event in found)
    data = np.concatenate([event.data for event in found])
    assert np.array_equal(data, [scan(k) for k in range(1000)])
    assert [event.clock for event in found] == [10 * event.index for event in found]
    assert [event.sequence for event in found] == list(range(125))
    assert device.state.ring.dropped == 0


def test_every_dropped_sample_is_in_an_exact_gap(core):
    rng = np.random.default_rng(4)
    device, decoder, found = board(core), Decoder(window=0), []
    device.obey(START)
    for k in range(20_000):
        device.step(scan(k))
        if rng.random() < 0.1:  # a frame's worth of samples every 10 on average: too slow
            found += decoder.feed(device.next())
    device.obey(STOP)
    found += decoder.feed(device.drain())
    gaps = [event for event in found if isinstance(event, Gap)]
    frames = [event for event in found if isinstance(event, Samples)]
    kept = sum(len(event.data) for event in frames)
    end = frames[-1].index + len(frames[-1].data)
    lost = sum(gap.length for gap in gaps) + 20_000 - end
    assert len(gaps) > 50
    assert lost == device.state.ring.dropped == 20_000 - kept
    for frame in frames:
        assert [tuple(row) for row in frame.data] == [
            scan(frame.index + n) for n in range(len(frame.data))
        ]
    behind = {gap.index + gap.length for gap in gaps}
    assert behind == {frame.index for frame in frames if frame.flags & OVERRUN}


def test_over_range_is_flagged_in_its_own_frame(core):
    device = board(core)
    device.obey(START)
    for k in range(32):
        device.step(scan(k), flags=OVER_RANGE if k == 13 else 0)
    frames = Decoder().feed(device.drain())
    assert [frame.over_range for frame in frames] == [False, True, False, False]


def test_a_frame_leaves_at_least_every_half_second(core):
    device = board(core, slots=500, rate_hz=40.0)
    device.obey(START)
    for k in range(20):
        device.step(scan(k))
    assert [len(frame.data) for frame in Decoder().feed(device.drain())] == [10, 10]


def test_a_new_stream_begins_at_index_zero_and_the_old_one_is_still_sent(core):
    device, decoder = board(core), Decoder()
    device.obey(START)
    for k in range(12):
        device.step(scan(k))
    device.obey(STOP + START)
    for k in range(8):
        device.step(scan(k))
    found = decoder.feed(device.drain())
    assert [(e.stream, e.index, len(e.data)) for e in found if isinstance(e, Samples)] == [
        (1, 0, 8),
        (1, 8, 4),
        (2, 0, 8),
    ]
    assert [event for event in found if isinstance(event, Gap)] == [Gap(12, 0, exact=False)]


def test_a_sample_that_was_not_taken_in_time_is_missing_at_its_index(core):
    device, decoder = board(core, blocks=8), Decoder(window=0)
    device.obey(START)
    for k in range(40):
        if k in (13, 14, 30):
            device.miss()
        else:
            device.step(scan(k))
    device.obey(STOP)
    found = decoder.feed(device.drain())
    assert [event for event in found if isinstance(event, Gap)] == [Gap(13, 2), Gap(30, 1)]
    frames = [event for event in found if isinstance(event, Samples)]
    assert [(f.index, len(f.data), f.flags) for f in frames] == [
        (0, 8, 0),
        (8, 5, 0),
        (15, 8, OVERRUN),
        (23, 7, 0),
        (31, 8, OVERRUN),
        (39, 1, 0),
    ]
    assert device.state.ring.dropped == 3
