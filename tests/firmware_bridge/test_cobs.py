"""Worked examples: Cheshire & Baker, IEEE/ACM Trans. Networking 7 (1999) 159, rules of section III;

the boundary cases at 254 and 255 bytes follow from them (common practice: no code byte behind a last
full run). From memory of the paper, checked against each other by both directions of the code.
"""

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from firmware_bridge.cobs import decode, encode, encode_rows

EXAMPLES = [
    (b"", "01"),
    (b"\x00", "01 01"),
    (b"\x00\x00", "01 01 01"),
    (b"\x11\x22\x00\x33", "03 11 22 02 33"),
    (b"\x11\x22\x33\x44", "05 11 22 33 44"),
    (b"\x11\x00\x00\x00", "02 11 01 01 01"),
    (bytes(range(1, 255)), "ff" + bytes(range(1, 255)).hex()),
    (bytes(range(255)), "01 ff" + bytes(range(1, 255)).hex()),
    (bytes(range(1, 256)), "ff" + bytes(range(1, 255)).hex() + "02 ff"),
    (bytes(range(2, 256)) + b"\0", "ff" + bytes(range(2, 256)).hex() + "01 01"),
    (bytes(range(3, 256)) + b"\0\1", "fe" + bytes(range(3, 256)).hex() + "02 01"),
]


@pytest.mark.parametrize(("data", "stuffed"), EXAMPLES)
def test_worked_examples_both_ways(data, stuffed):
    assert encode(data) == bytes.fromhex(stuffed)
    assert decode(bytes.fromhex(stuffed)) == data


@given(st.lists(st.one_of(st.just(0), st.integers(0, 255)), max_size=1200).map(bytes))
def test_a_message_comes_back_and_holds_no_zero(data):
    stuffed = encode(data)
    assert 0 not in stuffed
    assert len(data) + 1 <= len(stuffed) <= len(data) + 1 + len(data) // 254
    assert decode(stuffed) == data


@pytest.mark.parametrize("length", [1, 2, 253, 254, 255, 256, 508, 509, 510, 762, 763, 1000])
@pytest.mark.parametrize("zeros", [0.0, 0.003, 0.1, 1.0])
def test_many_rows_at_once_are_the_same_bytes(length, zeros):
    rng = np.random.default_rng(length)
    rows = rng.integers(1, 256, (7, length)).astype(np.uint8)
    rows[rng.random(rows.shape) < zeros] = 0
    expected = b"".join(b"\0" + encode(row.tobytes()) + b"\0" for row in rows)
    assert encode_rows(rows) == expected


@pytest.mark.parametrize("stuffed", ["02", "05 11 22 33", "01 05", "ff 01", "03 11 22 09 33"])
def test_a_code_beyond_the_end_is_no_message(stuffed):
    assert decode(bytes.fromhex(stuffed)) is None


def decoded_byte_by_byte(stuffed):
    """As the paper has it, one code after the other."""
    out, place = b"", 0
    while place < len(stuffed):
        code = stuffed[place]
        run = stuffed[place + 1 : place + code]
        if len(run) < code - 1:
            return None
        out, place = out + run, place + code
        if code < 255 and place < len(stuffed):
            out += b"\0"
    return out


@given(
    st.lists(
        st.one_of(
            st.just(b"\x01"),
            st.just(b"\x01" * 40),
            st.just(b"\xff" + b"\x07" * 254),
            st.just(b"\xff" * 255),
            st.binary(min_size=1, max_size=5).filter(lambda part: 0 not in part),
        ),
        min_size=1,
        max_size=25,
    ).map(b"".join)
)
def test_whatever_comes_is_decoded_as_byte_by_byte(stuffed):
    assert decode(stuffed) == decoded_byte_by_byte(stuffed)
    assert decode(encode(stuffed)) == stuffed
