"""The worked examples of SPEC.md, read out of the page; and its tables against the code."""

import re
import zlib
from pathlib import Path

import numpy as np
import pytest

import firmware_bridge
from firmware_bridge.announcement import Announcement, ChannelInfo, encode_announcement
from firmware_bridge.arguments import (
    clear_arguments,
    line_arguments,
    ramp_arguments,
    rate_arguments,
    start_arguments,
)
from firmware_bridge.cobs import decode
from firmware_bridge.decoder import Decoder
from firmware_bridge.envelope import SEALED
from firmware_bridge.frame import HEADER, encode_frame
from firmware_bridge.host_note import (
    End,
    Join,
    Pieces,
    Remark,
    Stamp,
    cut,
    parse_host_note,
    seal_host_note,
)
from firmware_bridge.message import (
    Command,
    CommandCode,
    LockIn,
    Note,
    Reply,
    encode_command,
    encode_lock_in,
    encode_note,
    encode_reply,
)
from firmware_bridge.message_head import MessageType
from firmware_bridge.recording_header import Header, encode_header, parse_header

PAGE = Path(firmware_bridge.__file__).with_name("SPEC.md").read_text(encoding="utf-8")
EXAMPLES = {
    name: bytes.fromhex(text)
    for name, text in re.findall(r"```hex ([\w-]+)\n(.*?)```", PAGE, re.DOTALL)
}
STREAM = 0x5EED0001
ANNOUNCED = Announcement(
    STREAM,
    2000.0,
    "int16",
    3,
    [ChannelInfo("pd", "V", 0.0005, 0.0, -2048, 2047), ChannelInfo("drive", "V", 0.001)],
    board="bench 1",
    firmware="1.0",
    clock_hz=1_000_000,
)
LOCKED_IN = LockIn(STREAM, 0, 2000, 0, 14, ((85899346, -1000000, 2000000),))
ASKED = {
    "identify": (1, 1, b""),
    "start": (2, 2, b""),
    "stop": (3, 3, b""),
    "start-lock-in": (2, 4, start_arguments(lock_in_channel=0, lock_in_length=2000)),
    "rate": (4, 5, rate_arguments(62.5)),
    "set-line": (5, 6, line_arguments(1, 85899346, 0.25, -np.pi / 2)),
    "clear-line": (6, 7, clear_arguments(1)),
    "ramp": (7, 8, ramp_arguments(0.5, 4000)),
    "keep-alive": (8, 10, b""),
}
WIRE = {
    **{name: (encode_command(*asked), Command(*asked)) for name, asked in ASKED.items()},
    "announcement": (encode_announcement(ANNOUNCED), ANNOUNCED),
    "reply-done": (encode_reply(Reply(2, 2)), Reply(2, 2, 0, "")),
    "reply-refused": (
        encode_reply(Reply(4, 9, 2, "rate too high")),
        Reply(4, 9, 2, "rate too high"),
    ),
    "lock-in": (encode_lock_in(LOCKED_IN), LOCKED_IN),
    "note": (encode_note("laser warm"), Note("laser warm")),
}
HOST = {
    "record-stamp": Stamp(1_800_000_000_000_000_000, 123_000_000_000, STREAM, 302, 151000),
    "record-join": Join(0x5EED0002, 0, 5000, 57.5),
    "record-remark": Remark("port is back"),
    "record-end": End(STREAM, 2000),
}
FRAMES = {
    "samples-int16": (
        np.array([[1000, -2], [1003, 0]], np.int16),
        {"index": 300, "sequence": 6, "stream": STREAM, "clock": 150000, "slots": 3},
    ),
    "samples-int24": (
        np.array([[-1], [70000], [8388607]], np.int32),
        {"index": 2**32, "sequence": 2**32 - 1, "stream": STREAM, "flags": 1, "format": "int24"},
    ),
    "samples-int32": (
        np.array([[-2147483648]], np.int32),
        {"index": 0, "sequence": 0, "stream": 7},
    ),
}


def test_every_example_of_the_page_is_checked_here():
    others = {
        "samples-int16-content",
        "header",
        "record-samples",
        "record-piece-1",
        "record-piece-2",
    }
    assert set(EXAMPLES) == set(WIRE) | set(HOST) | set(FRAMES) | others


@pytest.mark.parametrize("name", WIRE)
def test_messages_are_written_and_read_as_the_page_says(name):
    wire, event = WIRE[name]
    assert wire == EXAMPLES[name]
    assert Decoder().feed(EXAMPLES[name]) == [event]


@pytest.mark.parametrize("name", FRAMES)
def test_frames_are_written_and_read_as_the_page_says(name):
    samples, fields = FRAMES[name]
    assert encode_frame(samples, **fields) == EXAMPLES[name]
    (event,) = Decoder().feed(EXAMPLES[name])
    np.testing.assert_array_equal(event.data, samples)
    assert (event.index, event.sequence, event.stream) == (
        fields["index"],
        fields["sequence"],
        fields["stream"],
    )
    assert event.over_range == bool(fields.get("flags", 0))


def test_the_content_is_that_of_the_frame_by_plain_arithmetic():
    # Independent of our packing: each field summed by hand from the bytes on the page.
    content = EXAMPLES["samples-int16-content"]
    at = lambda start, size: sum(content[start + k] << 8 * k for k in range(size))  # noqa: E731
    assert [at(0, 1), at(1, 1), at(2, 2), at(4, 4), at(8, 4)] == [1, 1, 0, STREAM, 6]
    assert [at(12, 1), at(13, 1), at(14, 2), at(16, 8)] == [2, 2, 3, 300]
    assert [at(24, 8), at(32, 2), at(34, 2)] == [150000, 2, 0]
    assert [at(36, 2), at(38, 2), at(40, 2), at(42, 2)] == [1000, 2**16 - 2, 1003, 0]
    assert content[44:] == bytes(4)
    message = decode(EXAMPLES["samples-int16"][1:-1])
    assert message == content + zlib.crc32(content).to_bytes(4, "little")


def test_the_crc_is_the_published_one():
    # Check value of CRC-32/ISO-HDLC in the catalogue of parametrised CRC algorithms (G. Cook),
    # common knowledge of the trade, from memory; zlib's is the algorithm itself.
    assert zlib.crc32(b"123456789") == 0xCBF43926
    assert "0xCBF43926" in PAGE
    for name in [*WIRE, *FRAMES]:
        assert zlib.crc32(decode(EXAMPLES[name][1:-1])) == SEALED == 0x2144DF1C


def test_the_table_of_the_frame_is_the_header_of_the_code():
    section = PAGE.split("## 2. Samples")[1].split("## 3.")[0]
    rows = re.findall(r"^\| (\d+) \| (\d+) \| (\w+) \|", section, re.MULTILINE)
    fields = [
        (HEADER.fields[name][1], HEADER.fields[name][0].itemsize, name) for name in HEADER.names
    ]
    assert [(int(offset), int(size), name) for offset, size, name in rows] == fields
    assert HEADER.itemsize == 36


def test_arguments_are_those_of_the_page_by_plain_arithmetic():
    # Summed by hand from the bytes of the page, behind type, version, length, request, code, zero.
    of = {name: decode(EXAMPLES[name][1:-1])[8:-4] for name in ASKED}
    at = lambda name, start, size: sum(of[name][start + k] << 8 * k for k in range(size))  # noqa: E731
    assert (of["start-lock-in"][0], of["start-lock-in"][1], at("start-lock-in", 4, 4)) == (
        3,
        0,
        2000,
    )
    assert at("rate", 0, 4) / at("rate", 4, 4) == 62.5
    assert (of["set-line"][0], at("set-line", 2, 2) / 2**16) == (1, 0.25)
    assert (at("set-line", 4, 4), at("set-line", 8, 4) / 2**32) == (85899346, 0.75)
    assert of["clear-line"] == bytes([1, 0, 0, 0])
    assert (at("ramp", 0, 2) / 2**15, at("ramp", 4, 4)) == (0.5, 4000)


def test_the_table_of_commands_is_that_of_the_code():
    rows = re.findall(r"^\| (\d) \| ([a-z -]+) \| (?:none|\d+ bytes)", PAGE, re.MULTILINE)
    named = {int(code): name.replace("-", "_").replace(" ", "_").upper() for code, name in rows}
    assert named == {code.value: code.name for code in CommandCode}


def test_the_table_of_types_is_that_of_the_code():
    rows = re.findall(r"^\| 0x(\w\w) \| ([\w-]+) \|", PAGE, re.MULTILINE)
    named = {int(code, 16): name.replace("-", "_").upper() for code, name in rows}
    assert named == {kind.value: kind.name for kind in MessageType}


def test_the_header_is_written_and_read_as_the_page_says():
    header = Header(ANNOUNCED, 1_800_000_000_000_000_000, {"port": "/dev/ttyACM0"})
    assert encode_header(header) == EXAMPLES["header"]
    assert parse_header(EXAMPLES["header"] + b"more", "x") == (header, 192)
    assert header.record_bytes == 64


@pytest.mark.parametrize("name", HOST)
def test_the_hosts_records_are_written_and_read_as_the_page_says(name):
    assert seal_host_note(HOST[name]).ljust(64, b"\0") == EXAMPLES[name]
    assert parse_host_note(EXAMPLES[name]) == HOST[name]


def test_a_samples_record_is_the_frame_unstuffed_and_padded():
    message = decode(EXAMPLES["samples-int16"][1:-1])
    assert EXAMPLES["record-samples"] == message.ljust(64, b"\0")


def test_a_long_message_is_cut_into_pieces_as_the_page_says():
    note = decode(encode_note("x" * 60)[1:-1])
    cuts = [piece.ljust(64, b"\0") for piece in cut(note, 5, 64)]
    assert cuts == [EXAMPLES["record-piece-1"], EXAMPLES["record-piece-2"]]
    pieces = Pieces()
    assert [pieces.put(record) for record in cuts] == [None, note]
