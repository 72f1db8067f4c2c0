"""The core as a board: every command and its answer."""

import pytest
from firmware_core import Device, Limits

from firmware_bridge.announcement import Announcement, ChannelInfo, encode_announcement
from firmware_bridge.arguments import rate_arguments, start_arguments
from firmware_bridge.decoder import Decoder, Reply
from firmware_bridge.frame import CommandCode, encode_command, encode_reply

CHANNELS = [ChannelInfo("pd", "V", 0.5e-3, 0.0, -2048, 2047), ChannelInfo("drive", "V", 1e-3)]


def announced(stream, rate_hz=1000.0, slots=100):
    return Announcement(
        stream,
        rate_hz,
        "int16",
        slots,
        CHANNELS,
        "bench 1",
        "1.0",
        simulated=True,
        clock_hz=1_000_000,
    )


@pytest.fixture
def device(core):
    return Device(core, announced(0), Limits(2048, 2047, 0, 4095, 4095), seed=41)


def answer(device, code, arguments=b"", request=300):
    return device.obey(encode_command(code, request, arguments))


def reply(code, status=0, text=""):
    return encode_reply(Reply(code, 300, status, text))


def test_identify_is_answered_by_the_announcement(device):
    assert answer(device, CommandCode.IDENTIFY) == encode_announcement(announced(41))


def test_start_begins_a_new_stream_and_says_so(device):
    expected = encode_announcement(announced(42)) + reply(CommandCode.START)
    assert answer(device, CommandCode.START) == expected


def test_start_while_sending_changes_nothing(device):
    first = answer(device, CommandCode.START)
    for _ in range(150):
        device.step()
    assert answer(device, CommandCode.START) == first
    assert device.state.index == 150
    again = answer(device, CommandCode.START, start_arguments())
    assert again == reply(CommandCode.START, 2, "stop first")


def test_stop_sends_what_is_there(device):
    answer(device, CommandCode.START)
    for _ in range(130):
        device.step()
    assert answer(device, CommandCode.STOP) == reply(CommandCode.STOP)
    for _ in range(300):
        device.step()
    assert [len(frame.data) for frame in Decoder().feed(device.drain())] == [100, 30]


def test_rate_changes_between_streams_only(device):
    found = answer(device, CommandCode.RATE, rate_arguments(62.5))
    assert device.rate_wanted == (125, 2)
    assert found == encode_announcement(announced(41, 62.5, slots=15)) + reply(CommandCode.RATE)
    refused = answer(device, CommandCode.RATE, rate_arguments(20_000))
    assert refused == reply(CommandCode.RATE, 2, "no such rate")
    zero = answer(device, CommandCode.RATE, b"\1\0\0\0\0\0\0\0")
    assert zero == reply(CommandCode.RATE, 2, "no such rate")
    answer(device, CommandCode.START)
    while_sending = answer(device, CommandCode.RATE, rate_arguments(100))
    assert while_sending == reply(CommandCode.RATE, 2, "stop first")


def test_keep_alive_is_not_answered(device):
    assert answer(device, CommandCode.KEEP_ALIVE) == b""
    assert device.state.drive.silent == 0


@pytest.mark.parametrize("code", [0, 9, 200, 255])
def test_unknown_commands_are_named_so(device, code):
    assert answer(device, code, b"1234") == reply(code, 1, "unknown command")


@pytest.mark.parametrize("code", list(CommandCode))
def test_arguments_of_another_length_are_refused(device, code):
    assert answer(device, code, b"12345") == reply(code, 2, "wrong length")


@pytest.mark.parametrize("sends", [0, 4, 7])
def test_start_asks_for_something(device, sends):
    arguments = bytes([sends, 0, 0, 0, 100, 0, 0, 0])
    assert answer(device, CommandCode.START, arguments) == reply(
        CommandCode.START, 2, "no such start"
    )
    no_channel = start_arguments(lock_in_channel=2, lock_in_length=10)
    assert answer(device, CommandCode.START, no_channel) == reply(
        CommandCode.START, 2, "no such start"
    )
