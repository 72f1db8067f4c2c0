import struct
import zlib

import numpy as np
import pytest

from firmware_bridge.cobs import decode
from firmware_bridge.decoder import Decoder, Samples
from firmware_bridge.frame import encode_frame, encode_stream
from firmware_bridge.message_head import MessageError

FORMATS = [(np.int16, None, 2), (np.int32, "int24", 3), (np.int32, None, 4)]


def counts(dtype, n=1003, channels=2, width=2):
    half = 1 << (8 * width - 1)
    rng = np.random.default_rng(width)
    return rng.integers(-half, half, (n, channels)).astype(dtype)


def test_a_frame_is_the_header_of_the_specification_in_its_envelope():
    samples = np.array([[1, -2], [300, 0x7FFF]], np.int16)
    wire = encode_frame(samples, index=2**40, sequence=7, stream=9, clock=2**33 + 1, flags=3)
    assert (wire[0], wire[-1]) == (0, 0)
    message = decode(wire[1:-1])
    content = struct.pack(
        "<BBHIIBBHQQHH4h", 1, 1, 3, 9, 7, 2, 2, 2, 2**40, 2**33 + 1, 2, 0, 1, -2, 300, 0x7FFF
    )
    assert message == content + struct.pack("<I", zlib.crc32(content))


@pytest.mark.parametrize(("dtype", "name", "width"), FORMATS)
def test_a_stream_is_its_frames_one_by_one(dtype, name, width):
    samples = counts(dtype, width=width)
    over = np.zeros(len(samples), bool)
    over[[205, 950]] = True
    stream = encode_stream(
        samples,
        slots=100,
        first_index=7,
        first_sequence=2**32 - 2,
        stream=5,
        clock=10,
        ticks_per_sample=2.5,
        over_range=over,
        format=name,
    )
    frames = [
        encode_frame(
            samples[k : k + 100],
            index=7 + k,
            sequence=(2**32 - 2 + k // 100) % 2**32,
            stream=5,
            clock=10 + int(2.5 * k),
            flags=int(over[k : k + 100].any()),
            slots=100,
            format=name,
        )
        for k in range(0, 1003, 100)
    ]
    assert stream == b"".join(frames)
    decoder = Decoder()
    events = decoder.feed(stream) + decoder.close()
    assert all(isinstance(event, Samples) for event in events)
    np.testing.assert_array_equal(np.concatenate([event.data for event in events]), samples)
    assert events[0].data.dtype == dtype
    assert [event.index for event in events if event.over_range] == [207, 907]


def test_the_ends_of_the_fields_fit():
    wire = encode_frame(
        np.array([[-(2**31)]], np.int32),
        index=2**64 - 1,
        sequence=2**32 - 1,
        stream=2**32 - 1,
        clock=2**64 - 1,
    )
    (event,) = Decoder().feed(wire)
    assert (event.index, event.sequence) == (2**64 - 1, 2**32 - 1)
    assert (event.stream, event.clock, event.data[0, 0]) == (2**32 - 1, 2**64 - 1, -(2**31))


@pytest.mark.parametrize(
    ("change", "message"),
    [
        (
            {"samples": np.zeros((3, 1))},
            "samples must be integers of shape (n, channels), got float64 (3, 1)",
        ),
        ({"slots": 2}, "a frame of 2 slots cannot hold 3 samples"),
        ({"format": "int8"}, "format must be one of int16, int24, int32, got 'int8'"),
        ({"stream": 2**32}, "stream must be 0 to 2^32 - 1, got 4294967296"),
        ({"index": 2**64 - 2}, "sample indices must be 0 to 2^64 - 1, got 18446744073709551616"),
        (
            {"samples": np.array([[2**23]], np.int32), "format": "int24"},
            "int24 samples must be -8388608 to 8388607, got 8388608 to 8388608",
        ),
    ],
)
def test_what_does_not_fit_is_refused(change, message):
    given = {"samples": np.zeros((3, 1), np.int16), "index": 0, "sequence": 0} | change
    with pytest.raises(MessageError) as error:
        encode_frame(given.pop("samples"), **given)
    assert str(error.value) == message
