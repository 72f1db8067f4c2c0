"""The core's command parser, fed what the Python codec encodes, and everything else."""

import numpy as np

from firmware_bridge.envelope import wrap
from firmware_bridge.frame import CommandCode, encode_command, encode_note
from firmware_bridge.message_head import MessageType, pack


def asked(command):
    words = b"".join(word.to_bytes(4, "little") for word in command.arguments)
    return command.code, command.request, words[: command.length]


def random_command(rng):
    arguments = rng.integers(0, 256, 4 * rng.integers(0, 4)).astype(np.uint8)
    arguments[rng.random(arguments.size) < 0.5] = 0
    return int(rng.integers(0, 256)), int(rng.integers(0, 65536)), arguments.tobytes()


def test_every_command_comes_through(core):
    rng = np.random.default_rng(7)
    wanted = [random_command(rng) for _ in range(1000)]
    found, damaged = core.commands(b"".join(encode_command(*command) for command in wanted))
    assert [asked(command) for command in found] == wanted
    assert damaged == 0


def test_whatever_lies_between_commands_is_counted_and_costs_none(core):
    rng = np.random.default_rng(8)
    wanted, wire = [], b""
    for _ in range(300):
        wanted.append(random_command(rng))
        noise = rng.integers(1, 256, rng.integers(1, 200)).astype(np.uint8).tobytes()
        wire += noise + encode_command(*wanted[-1])
    found, damaged = core.commands(wire)
    assert [asked(command) for command in found] == wanted
    assert damaged == 300


def test_any_flipped_bit_is_caught(core):
    wire = encode_command(CommandCode.SET_LINE, 513, bytes(range(12)))
    for bit in range(8, 8 * (len(wire) - 1)):
        damaged = bytearray(wire)
        damaged[bit // 8] ^= 1 << bit % 8
        assert core.commands(bytes(damaged))[0] == []


def test_only_commands_of_this_wire_version_are_obeyed(core):
    body = b"\x01\x00\x02\x00"
    newer = bytearray(pack(MessageType.COMMAND, body))
    newer[1] = 2
    too_long = bytearray(pack(MessageType.COMMAND, body))
    too_long[2] += 1
    for content in (bytes(newer), bytes(too_long), pack(MessageType.REPLY, body)):
        assert core.commands(wrap(content)) == ([], 1)
    assert core.commands(encode_note("start")) == ([], 1)


def test_a_message_longer_than_the_buffer_is_left_out(core):
    longer = encode_command(CommandCode.START, 1, bytes(60))
    short = encode_command(CommandCode.STOP, 2)
    found, damaged = core.commands(longer + short)
    assert [command.code for command in found] == [CommandCode.STOP]
    assert damaged == 1
    assert len(core.commands(longer, size=80)[0]) == 1


def test_full_runs_of_254_bytes_are_unstuffed(core):
    for length in range(240, 270):
        wire = encode_command(CommandCode.START, 0x0101, b"\x07" * length)
        found, damaged = core.commands(wire, size=400)
        assert [(command.request, command.length) for command in found] == [(0x0101, length)]
        assert damaged == 0
