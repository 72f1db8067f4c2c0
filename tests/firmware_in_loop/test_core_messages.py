"""The core's encoders, compiled for this computer, byte for byte against the Python codec."""

import ctypes
import zlib

import numpy as np
import pytest
from firmware_in_loop.random_messages import check_announcement, check_frame, check_text

from firmware_bridge.cobs import decode
from firmware_bridge.frame import encode_frame
from firmware_bridge.message import encode_note

COUNT = 2000  # the whole run has 100 000: python tests/firmware_in_loop/random_messages.py


def test_random_messages_are_the_same_bytes(core):
    rng = np.random.default_rng(2026)
    for k in range(COUNT):
        check_frame(core, rng)
        if k % 10 == 0:
            check_announcement(core, rng)
            check_text(core, rng)


@pytest.mark.parametrize("length", [*range(230, 270), *range(490, 530), 1000, 1024])
def test_runs_about_254_bytes_long_are_stuffed_alike(core, length):
    # Cheshire and Baker 1999: a code byte reaches 254 bytes, and a last full run needs no other.
    assert core.encode_note("x" * length) == encode_note("x" * length)


def test_the_crc_is_that_of_the_catalogue(core):
    # CRC-32/ISO-HDLC, check value of "123456789" in G. Cook, Catalogue of parametrised CRC algorithms
    crc = 0xFFFFFFFF
    core.library.pd_crc_push.restype = ctypes.c_uint32
    for byte in b"123456789":
        crc = core.library.pd_crc_push(crc, byte)
    assert crc ^ 0xFFFFFFFF == 0xCBF43926 == zlib.crc32(b"123456789")


def test_unfilled_slots_are_zero_whatever_lies_behind_the_payload(core):
    wire = core.encode_frame(
        b"\x01\x02" + b"\xaa" * 30, slots=4, filled=1, channels=1, format=2, index=9, stream=1
    )
    assert wire == encode_frame(
        np.array([0x0201], np.int16), index=9, sequence=0, stream=1, slots=4
    )
    assert decode(wire[1:-1])[36:44] == b"\x01\x02\0\0\0\0\0\0"


def test_what_does_not_fit_the_output_is_not_written(core):
    whole = core.encode_note("laser warm")
    for room in range(len(whole)):
        assert core.encode_note("laser warm", room=room) == b""
    assert core.encode_note("laser warm", room=len(whole)) == whole
