"""The fault injector and the check of what came of it: both must see what they are there to see."""

import numpy as np
import pytest
from long_runs.faults import KINDS, damage, undamaged
from long_runs.known_stream import RATE_HZ, SLOTS, KnownStream, samples
from long_runs.recording_check import check_recording

from firmware_bridge.announcement import Announcement, ChannelInfo
from firmware_bridge.decoder import Decoder, Samples
from firmware_bridge.envelope import Unwrapper
from firmware_bridge.recording_header import Header
from firmware_bridge.writer import Writer


@pytest.mark.parametrize("kind", KINDS)
@pytest.mark.parametrize("rate", [1e-4, 1e-3, 1e-2])
def test_what_is_called_undamaged_stands_in_what_arrives(kind, rate):
    rng = np.random.default_rng(5)
    batch = KnownStream(3, rng).batch(300)
    data, stretches, done = damage(batch.wire, [kind], rate, rng)
    intact = undamaged(batch.starts, batch.ends, stretches)
    assert done > 0
    assert np.count_nonzero(intact) > 0
    for start, end, is_intact in zip(batch.starts, batch.ends, intact, strict=True):
        frame = batch.wire[start : end + 1]
        # what is not called undamaged may arrive whole by chance, the other way round it may not
        assert not is_intact or frame in data
    if kind in ("flips", "drops", "inserts"):
        assert 300 - np.count_nonzero(intact) <= done
    if kind == "flips":
        arrived = np.frombuffer(data, np.uint8)
        changed = np.flatnonzero(arrived != np.frombuffer(batch.wire, np.uint8))
        touched = np.searchsorted(batch.starts, changed, "right") - 1
        assert set(np.flatnonzero(~intact)) == set(touched)


def test_no_fault_leaves_everything_as_it_was():
    rng = np.random.default_rng(5)
    batch = KnownStream(3, rng).batch(20)
    data, stretches, done = damage(batch.wire, list(KINDS), 0.0, rng)
    assert (data, done) == (batch.wire, 0)
    assert undamaged(batch.starts, batch.ends, stretches).all()


def test_the_known_stream_is_what_the_decoder_gives():
    stream = KnownStream(9, np.random.default_rng(1))
    first, second = stream.batch(7), stream.batch(5)
    decoder = Decoder()
    events = decoder.feed(first.wire + second.wire) + decoder.close()
    assert all(isinstance(event, Samples) for event in events)
    assert [e.index for e in events] == [*first.index, *second.index]
    for event in events:
        np.testing.assert_array_equal(event.data, samples(9, event.index, len(event.data)))


@pytest.fixture
def recorded(tmp_path):
    """Return a function that writes frames into a recording and checks it against what was sent."""

    def check(change=lambda messages: messages, drop_from_truth=(), lost=()):
        rng = np.random.default_rng(2)
        stream = KnownStream(4, rng)
        batch = stream.batch(12)
        messages = Unwrapper().feed(batch.wire)
        channels = [ChannelInfo("noise"), ChannelInfo("small")]
        announced = Announcement(4, RATE_HZ, "int16", SLOTS, channels)
        writer = Writer(tmp_path / "a.mfr", Header(announced), overwrite=True)
        for message in change(messages):
            writer.append(message)
        writer.close()
        rows = [
            (4, index, filled, k not in lost)
            for k, (index, filled) in enumerate(zip(batch.index, batch.filled, strict=True))
            if k not in drop_from_truth
        ]
        return check_recording(tmp_path / "a.mfr", np.array(rows, np.int64))

    return check


def test_a_sound_recording_is_called_sound(recorded):
    verdict = recorded(lambda m: [*m[:5], *m[6:]], lost={5})
    assert verdict.is_sound
    assert (verdict.frames, verdict.undamaged, verdict.kept, verdict.gaps) == (12, 11, 11, 1)


def test_a_lost_undamaged_frame_is_seen(recorded):
    verdict = recorded(lambda m: [*m[:5], *m[6:]])
    assert (verdict.lost, verdict.wrong, verdict.gaps_wrong) == (1, 0, 0)


def test_a_lost_last_frame_is_seen(recorded):
    assert recorded(lambda m: m[:-1]).lost == 1


def test_wrong_samples_are_seen(recorded):
    def swap(messages):  # samples of the third frame under the index of the second
        other = bytearray(messages[2][:-4])
        other[16:24] = messages[1][16:24]
        from firmware_bridge.envelope import seal

        return [messages[0], seal(bytes(other)), *messages[2:]]

    verdict = recorded(swap)
    assert verdict.wrong > 0
    assert not verdict.is_sound


def test_samples_that_were_never_sent_are_seen(recorded):
    assert recorded(drop_from_truth={6}).wrong > 0


def test_a_gap_that_is_told_wrongly_is_seen(recorded, monkeypatch):
    from firmware_bridge.gap import Gap
    from firmware_bridge.recording import MfrRecording

    place = MfrRecording._placed

    def one_longer(self, index):
        placing = place(self, index)
        placing.gaps = [Gap(gap.index, gap.length + 1) for gap in placing.gaps]
        return placing

    monkeypatch.setattr(MfrRecording, "_placed", one_longer)
    verdict = recorded(lambda m: [*m[:5], *m[6:]], lost={5})
    assert verdict.gaps_wrong == 2  # one that is not so, one that is not told
