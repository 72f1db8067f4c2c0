import random

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from firmware_bridge.announcement import Announcement, ChannelInfo, encode_announcement
from firmware_bridge.cobs import decode, encode
from firmware_bridge.decoder import Decoder, Samples
from firmware_bridge.envelope import MESSAGE_MAX, Discarded, wrap
from firmware_bridge.frame import encode_frame
from firmware_bridge.gap import Gap
from firmware_bridge.message import (
    Command,
    LockIn,
    Note,
    Reply,
    encode_command,
    encode_lock_in,
    encode_note,
    encode_reply,
)

N = 20  # samples a frame
ANNOUNCED = Announcement(
    7,
    125000 / 3,
    "int16",
    N,
    [ChannelInfo("pd", "V", 1e-4, -0.1, -2048, 2047), ChannelInfo("drive ✓", "V")],
    board="bench",
    firmware="1.2",
    simulated=True,
    clock_hz=84_000_000,
    speed=20.5,
)
MESSAGES = [
    (encode_announcement(ANNOUNCED), ANNOUNCED),
    (encode_note("warming up ✓"), Note("warming up ✓")),
    (encode_command(2, 9), Command(2, 9)),
    (encode_command(4, 65535, b"\0\1\2"), Command(4, 65535, b"\0\1\2")),
    (encode_reply(Reply(2, 9, 2, "no")), Reply(2, 9, 2, "no")),
    (
        encode_lock_in(LockIn(7, 2**50, 4000, 1, 14, ((85899346, -(2**40), 3), (1, 0, 2**60)))),
        LockIn(7, 2**50, 4000, 1, 14, ((85899346, -(2**40), 3), (1, 0, 2**60))),
    ),
]


def samples_at(index, n=N):
    """Samples that can be told by their index."""
    return (np.arange(index, index + n) * 7919 % 65536 - 32768).astype(np.int16)[:, None]


def frame(k, stream=7):
    return encode_frame(samples_at(N * k), index=N * k, sequence=k, stream=stream, clock=1000 * k)


def decoded(data, cuts=()):
    decoder = Decoder()
    events = []
    for start, stop in zip([0, *cuts], [*cuts, len(data)], strict=True):
        events += decoder.feed(data[start:stop])
    return events + decoder.close()


def plain(events):
    """Events in a form that can be compared."""
    return [
        (e.index, e.data.tolist(), e.over_range, e.clock, e.stream, e.sequence)
        if isinstance(e, Samples)
        else e
        for e in events
    ]


def received(events):
    """Frames kept, by index; each must hold the samples of its index."""
    kept = {}
    for event in events:
        if isinstance(event, Samples):
            assert event.index not in kept
            kept[event.index] = event
            np.testing.assert_array_equal(event.data, samples_at(event.index, len(event.data)))
    return kept


def missing(events):
    """Gaps as sets of indices, less what late frames closed."""
    lost = set()
    for event in events:
        if isinstance(event, Gap):
            assert event.exact
            lost |= set(range(event.index, event.index + event.length))
        if isinstance(event, Samples):
            lost -= set(range(event.index, event.index + len(event.data)))
    return lost


@pytest.mark.parametrize(("wire", "event"), MESSAGES)
def test_every_message_comes_back(wire, event):
    assert decoded(wire) == [event]


@pytest.mark.parametrize("cut", ["whole", "bytewise", "odd"])
def test_events_do_not_depend_on_how_the_bytes_are_cut(cut):
    order = [0, 1, 4, 3, 3, 6, 9, 90, 8, 91]
    data = b"\x55garbage" + b"".join(part for k in order for part in (frame(k), MESSAGES[k % 6][0]))
    data += frame(92)[:-3]
    cuts = {"whole": [], "bytewise": range(1, len(data)), "odd": range(7, len(data), 29)}[cut]
    events = plain(decoded(data, cuts))
    assert events == plain(decoded(data))
    assert sum(isinstance(event, tuple) for event in events) == 9


@pytest.mark.parametrize("trailing", [b"", b"\0", b"\0\0\0", b"\x07", b"abc", frame(5)[:40]])
def test_trailing_bytes_take_nothing_away(trailing):
    events = decoded(frame(0) + frame(1) + trailing)
    assert sorted(received(events)) == [0, N]
    left = len(trailing.strip(b"\0"))
    assert [e.count for e in events if isinstance(e, Discarded)] == ([left] if left else [])


def test_any_single_flipped_bit_in_a_frame_is_caught():
    wire = frame(3)
    for place in range(1, len(wire) - 1):
        for bit in range(8):
            flipped = bytearray(wire)
            flipped[place] ^= 1 << bit
            events = decoded(frame(2) + bytes(flipped) + frame(4))
            assert sorted(received(events)) == [2 * N, 4 * N]
            assert [e for e in events if isinstance(e, Gap)] == [Gap(3 * N, N)]


def test_a_flipped_delimiter_costs_no_frame():
    # Every frame has zero bytes of its own on both sides.
    for place in (0, -1):
        wire = bytearray(frame(3))
        wire[place] ^= 0x10
        kept = received(decoded(frame(2) + bytes(wire) + frame(4)))
        assert {2 * N, 4 * N} <= set(kept)


def test_a_gap_is_reported_between_its_neighbours_with_exact_place_and_length():
    events = decoded(frame(0) + frame(1) + frame(5) + frame(6))
    assert [e if isinstance(e, Gap) else e.index for e in events] == [
        0,
        N,
        Gap(2 * N, 3 * N),
        5 * N,
        6 * N,
    ]


def test_where_listening_begins_is_no_gap():
    events = decoded(frame(1000) + frame(1001))
    assert [event.index for event in events] == [1000 * N, 1001 * N]


def test_reordered_frames_come_out_in_order_and_leave_no_gap():
    order = [0, 3, 1, 2, 4, 6, 5]
    events = decoded(b"".join(map(frame, order)))
    assert [event.index for event in events] == [N * k for k in range(7)]


def test_a_frame_that_comes_after_its_gap_was_reported_is_kept_and_closes_it():
    decoder = Decoder(window=2)
    events = decoder.feed(b"".join(map(frame, [0, 3, 4, 5, 2]))) + decoder.close()
    shown = [e if isinstance(e, Gap) else e.index // N for e in events]
    assert shown == [0, Gap(N, 2 * N), 3, 4, 5, 2]
    assert missing(events) == set(range(N, 2 * N))


def test_the_window_is_two_seconds_of_a_slow_board():
    slow = Announcement(7, 10.0, "int16", N, [ChannelInfo("pd")])
    decoder = Decoder()
    # Frames of 2 s: the first one behind a gap is not held for 64 frames, which would be minutes.
    events = decoder.feed(encode_announcement(slow) + frame(0) + frame(2))
    assert [type(event).__name__ for event in events] == [
        "Announcement",
        "Samples",
        "Gap",
        "Samples",
    ]


def test_duplicates_are_counted_and_dropped():
    events = decoded(frame(0) + frame(1) + frame(1) + frame(0) + frame(2))
    assert [e.index for e in events if isinstance(e, Samples)] == [0, N, 2 * N]
    twice = [e for e in events if isinstance(e, Discarded)]
    assert [e.count for e in twice] == [len(frame(1)) - 2, len(frame(0)) - 2]
    assert twice[0].reason == "duplicate of the frame at index 20"


def test_other_samples_for_a_known_index_are_no_duplicate():
    other = encode_frame(samples_at(5), index=0, sequence=0, stream=7)
    (_, refused) = decoded(frame(0) + other)
    assert refused.reason == "other samples for index 0, which has been received"


def test_a_new_stream_is_a_restart_with_a_gap_of_unknown_length():
    events = decoded(frame(4) + frame(6) + frame(0, stream=8) + frame(1, stream=8))
    shown = [e if isinstance(e, Gap) else (e.stream, e.index // N) for e in events]
    assert shown == [
        (7, 4), Gap(5 * N, N), (7, 6), Gap(7 * N, 0, exact=False), (8, 0), (8, 1)
    ]  # fmt: skip


def test_a_late_frame_of_the_stream_before_is_kept():
    events = decoded(frame(4) + frame(6) + frame(0, stream=8) + frame(5) + frame(1, stream=8))
    kept = [(e.stream, e.index // N) for e in events if isinstance(e, Samples)]
    assert kept == [(7, 4), (7, 6), (8, 0), (7, 5), (8, 1)]


@pytest.mark.parametrize(
    ("content", "reason"),
    [
        (bytes([9, 1, 0, 0]), "unknown message type 0x09"),
        (bytes([1, 2]) + bytes(40), "wire version 2; this program knows 1"),
        (bytes([1, 1]) + bytes(20), "a samples frame of 26 bytes is too short"),
        (bytes([1, 1]) + bytes(40), "a samples frame with 0 channels, format 0, 0 of 0 filled"),
        (bytes([6, 1, 50, 0, 1]), "a body of 50 bytes does not fit a message of 9"),
        (bytes([2, 1, 3, 0, 1, 2, 3]), "announcement: the body ends too early"),
    ],
)  # fmt: skip
def test_messages_that_break_a_rule_are_discarded_with_the_reason(content, reason):
    (event,) = decoded(wrap(content))
    assert event == Discarded(len(wrap(content)) - 2, reason)


def test_an_endless_message_takes_no_memory_and_is_counted():
    decoder = Decoder()
    block = b"\x01" * 65536
    events = [e for _ in range(40) for e in decoder.feed(block)]
    assert events == []
    assert len(decoder._unwrapper._rest) <= MESSAGE_MAX + MESSAGE_MAX // 254 + 1
    events = decoder.feed(b"\0" + frame(0)) + decoder.close()
    reason = "longer than any message (1048576 bytes)"
    assert events[0] == Discarded(40 * 65536, reason)
    assert decoded(block * 40 + b"\0" + frame(0))[0] == events[0]
    assert events[1].index == 0


def damage(rng, kind):
    """Return damaged wire bytes and the frames that are undamaged: bytes and both delimiters."""
    frames = [frame(k) for k in range(200)]
    blocks, touched = list(frames), set()
    for k in range(200):
        if rng.random() > 0.08:
            continue
        if kind == "dropped":
            blocks[k] = b""
            touched.add(k)
        elif kind == "flipped":
            place = rng.randrange(1, len(blocks[k]) - 1)
            flipped = bytearray(blocks[k])
            flipped[place] ^= 1 << rng.randrange(8)
            blocks[k] = bytes(flipped)
            touched.add(k)
        elif kind == "inserted":
            place = rng.randrange(1, len(blocks[k]) - 1)
            extra = rng.randbytes(rng.randrange(1, 9))
            blocks[k] = blocks[k][:place] + extra + blocks[k][place:]
            touched.add(k)
        elif kind == "between":
            blocks[k] = rng.randbytes(rng.randrange(1, 30)) + blocks[k]
        elif kind == "cut":
            place = rng.randrange(1, len(blocks[k]) - 1)
            blocks[k] = blocks[k][:place] + blocks[k][place + rng.randrange(1, 40) :]
            touched.add(k)
        elif kind == "duplicated":
            blocks[k] *= rng.randrange(2, 4)
    if kind == "reordered":
        for k in range(0, 190, 10):
            if rng.random() < 0.5:
                part = blocks[k : k + 8]
                rng.shuffle(part)
                blocks[k : k + 8] = part
    return b"".join(blocks), set(range(200)) - touched


KINDS = ["dropped", "flipped", "inserted", "between", "cut", "duplicated", "reordered"]


@pytest.mark.parametrize("kind", KINDS)
@pytest.mark.parametrize("seed", range(8))
def test_every_undamaged_frame_is_kept_and_every_gap_is_exact(kind, seed):
    rng = random.Random(f"{kind} {seed}")  # noqa: S311  # seeded damage, not secrets
    data, undamaged = damage(rng, kind)
    events = decoded(data, range(1, len(data), rng.randrange(1, 500)))
    kept = {index // N for index in received(events)}
    assert undamaged <= kept
    # Inserted or cut bytes may by chance leave a frame whole; nothing but true frames is kept.
    inside = range(min(kept), max(kept) + 1)
    lost = {i for k in inside if k not in kept for i in range(N * k, N * k + N)}
    assert missing(events) == lost
    gaps = [e for e in events if isinstance(e, Gap)]
    assert sum(gap.length for gap in gaps) == len(lost), "reported gaps need no correction here"
    ends = [gap.index + gap.length for gap in gaps]
    assert all(gap.index > end for gap, end in zip(gaps[1:], ends[:-1], strict=True))


@settings(max_examples=300)
@given(
    st.lists(
        st.one_of(
            st.binary(max_size=60), st.sampled_from([frame(0), frame(2), *(w for w, _ in MESSAGES)])
        ),
        max_size=12,
    ).map(b"".join),
    st.data(),
)
def test_no_content_raises_and_every_byte_is_accounted_for(data, draw):
    cuts = sorted(draw.draw(st.lists(st.integers(0, len(data)), max_size=5)))
    events = decoded(data, cuts)
    assert plain(events) == plain(decoded(data))
    lost = sum(event.count for event in events if isinstance(event, Discarded))
    pieces = [piece for piece in data.split(b"\0") if piece]
    whole = {encode(decode(wire[1:-1])) for wire in [frame(0), frame(2), *(w for w, _ in MESSAGES)]}
    good = [piece for piece in pieces[: None if data.endswith(b"\0") else -1] if piece in whole]
    kept_once = sum(
        len(piece) for k, piece in enumerate(good) if piece[1] != 1 or piece not in good[:k]
    )
    assert lost == sum(map(len, pieces)) - kept_once


@given(st.binary(min_size=1, max_size=200).filter(lambda content: content[0] != 0))
def test_any_well_wrapped_content_is_an_event_or_discarded(content):
    wire = wrap(content)
    for event in decoded(wire):
        assert isinstance(event, (Samples, Announcement, Note, Command, Reply, LockIn, Discarded))


def _of(name, filled, slots):
    counts = (np.arange(2 * filled).reshape(filled, 2) - 3).astype(np.int32)
    return encode_frame(counts, index=2**33, sequence=2**32 - 1, slots=slots, format=name, flags=1)


# Everything the decoder tells apart, by name.
WIRES = {
    **{type(event).__name__ + f" {k}": wire for k, (wire, event) in enumerate(MESSAGES)},
    **{f"{name}, {n} of 5": _of(name, n, 5) for name in ("int16", "int24", "int32") for n in (0, 2, 5)},
    "a gap": frame(0) + frame(3) + frame(4),
    "a duplicate": frame(0) + frame(0),
    "out of order": frame(1) + frame(3) + frame(2),
    "a restart": frame(5) + frame(0, stream=8),
    "a message unknown": wrap(bytes([9, 1, 0, 0])),
    "a version unknown": wrap(bytes([1, 2]) + bytes(40)),
    "a frame that does not add up": wrap(bytes([1, 1]) + bytes(40)),
    "damage between": frame(0) + b"\0\x11\x22\0" + frame(1),
    "no stuffing": b"\0\xf0abc\0" + frame(1),
}  # fmt: skip


@pytest.mark.parametrize("name", WIRES)
@pytest.mark.parametrize(
    "trailing", [b"", b"\0", b"\0\0\0", b"\x05abc", MESSAGES[1][0], frame(9)[:50]]
)
def test_every_case_whole_byte_by_byte_and_with_trailing_bytes(name, trailing):
    wire = WIRES[name]
    alone = plain(decoded(wire))
    assert alone
    whole = plain(decoded(wire + trailing))
    assert plain(decoded(wire + trailing, range(1, len(wire + trailing)))) == whole
    # What is held for its turn comes out at the end: trailing bytes may come out before it.
    behind = plain(decoded(trailing))
    assert len(whole) == len(alone) + len(behind)
    assert all(event in whole for event in [*alone, *behind])


@pytest.mark.parametrize(
    "name",
    [name for name in WIRES if name.startswith(("int", "Ann", "Note", "Comm", "Reply", "Lock"))],
)
def test_any_single_flipped_bit_in_any_message_is_caught(name):
    wire = WIRES[name]
    for place in range(1, len(wire) - 1):
        for bit in range(8):
            flipped = bytearray(wire)
            flipped[place] ^= 1 << bit
            assert {type(e) for e in decoded(bytes(flipped))} <= {Discarded}, (place, bit)
