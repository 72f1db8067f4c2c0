"""A board that begins again under the stream id it had: its samples are kept, nothing else is."""

import time

import numpy as np
import pytest

from firmware_bridge.announcement import Announcement, ChannelInfo, encode_announcement
from firmware_bridge.decoder import Decoder, Discarded, Gap, Samples
from firmware_bridge.envelope import Unwrapper
from firmware_bridge.frame import encode_frame
from firmware_bridge.gap import Gap as GridGap
from firmware_bridge.intake import Intake
from firmware_bridge.live_events import LiveBlock, LiveGap
from firmware_bridge.live_view import LiveView
from firmware_bridge.recording import open_mfr

SLOTS, RATE_HZ, STREAM = 10, 1000.0, 7


def frame(k, seed=0):
    rng = np.random.default_rng([seed, k])
    data = rng.integers(-1000, 1000, (SLOTS, 1)).astype(np.int16)
    return encode_frame(data, index=k * SLOTS, sequence=k, stream=STREAM, clock=k)


def announced(rate_hz=RATE_HZ):
    return encode_announcement(
        Announcement(STREAM, rate_hz, "int16", SLOTS, [ChannelInfo("pd", "V", 0.5)])
    )


def events_of(frames):
    decoder = Decoder()
    events = decoder.feed(announced() + b"".join(frames)) + decoder.close()
    return [e for e in events if isinstance(e, (Samples, Gap, Discarded))]


def kept(events):
    return [(e.stream, e.index) for e in events if isinstance(e, Samples)]


@pytest.mark.parametrize("before", [3, 40, 3000])
@pytest.mark.parametrize("first", [0, 1])
def test_every_frame_after_the_new_beginning_is_kept(before, first):
    events = events_of(
        [frame(k) for k in range(before)] + [frame(k, seed=1) for k in range(first, 8)]
    )
    assert not [e for e in events if isinstance(e, Discarded)]
    streams = list(dict.fromkeys(stream for stream, _ in kept(events)))
    assert streams[0] == STREAM
    assert len(streams) == 2
    assert kept(events) == [(STREAM, k * SLOTS) for k in range(before)] + [
        (streams[1], k * SLOTS) for k in range(first, 8)
    ]
    assert [e for e in events if isinstance(e, Gap)] == [Gap(before * SLOTS, 0, exact=False)]


def test_it_may_happen_twice():
    events = events_of([frame(k, seed) for seed in range(3) for k in range(20)])
    streams = list(dict.fromkeys(stream for stream, _ in kept(events)))
    assert len(streams) == 3
    assert len(kept(events)) == 60


@pytest.mark.parametrize("number", [0, 5, 1900])
def test_one_frame_that_lies_behind_is_no_new_beginning(number):
    frames = [frame(k) for k in range(2000)]
    events = events_of([*frames, frame(number, seed=1), *(frame(k) for k in range(2000, 2010))])
    assert {stream for stream, _ in kept(events)} == {STREAM}
    assert len(kept(events)) == 2010
    assert len([e for e in events if isinstance(e, Discarded)]) == 1
    assert not [e for e in events if isinstance(e, Gap)]


def test_what_came_twice_or_late_is_no_new_beginning():
    order = [*range(100), *range(60, 70), *range(105, 120), *range(100, 105), *range(120, 140)]
    events = events_of([frame(k) for k in order])
    assert sorted(kept(events)) == [(STREAM, k * SLOTS) for k in range(140)]
    assert len([e for e in events if isinstance(e, Discarded)]) == 10


def recorded(path, wire):
    intake, unwrapper = Intake(path), Unwrapper()
    for data in wire:
        for piece in unwrapper.feed(data):
            intake.take(piece, time.monotonic_ns(), time.time_ns())
    intake.close()
    return intake


def test_a_recording_goes_on_with_a_gap_of_estimated_length(tmp_path):
    frames = [frame(k) for k in range(30)] + [frame(k, seed=1) for k in range(25)]
    intake = recorded(tmp_path / "a.mfr", [announced(), *frames])
    assert intake.samples == 550
    assert intake.bytes_discarded == 0
    recording = open_mfr(tmp_path / "a.mfr")
    (gap,) = recording.gaps
    assert (gap.index, gap.exact) == (300, False)
    values = recording.trace("pd").values
    expected = [
        np.random.default_rng([seed, k]).integers(-1000, 1000, SLOTS) * 0.5
        for seed, count in ((0, 30), (1, 25))
        for k in range(count)
    ]
    np.testing.assert_array_equal(values[~np.isnan(values)], np.concatenate(expected))
    assert any("began again under its stream id 7" in note.text for note in recording.notes)


def test_at_another_rate_it_goes_on_in_another_file(tmp_path):
    first, second = [frame(k) for k in range(30)], [frame(k, seed=1) for k in range(25)]
    intake = recorded(tmp_path / "a.mfr", [announced(), *first, announced(500.0), *second])
    recordings = [open_mfr(path) for path in intake.files]
    assert [(r.length, r.rate_hz, r.gaps) for r in recordings] == [
        (300, 1000.0, []),
        (250, 500.0, []),
    ]
    assert GridGap(0, 0) not in recordings[1].gaps


def test_the_view_goes_on_too():
    events = []
    view, unwrapper = LiveView(events.append), Unwrapper()
    for data in [announced(), *(frame(k, s) for s in range(2) for k in range(12))]:
        for piece in unwrapper.feed(data):
            view.take(piece, time.monotonic_ns(), time.time_ns())
    blocks = [e for e in events if isinstance(e, LiveBlock)]
    assert len(blocks) == 24
    (gap,) = [e for e in events if isinstance(e, LiveGap)]
    assert (gap.start_index, gap.exact) == (120, False)
    starts = [block.start_index for block in blocks]
    assert starts == [*range(0, 120, 10), *range(120 + gap.length, 240 + gap.length, 10)]
