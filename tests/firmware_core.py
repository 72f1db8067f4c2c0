"""The firmware's core, compiled for this computer, as Python objects."""

import ctypes as c
import struct

from firmware_structs import (
    Board,
    Channel,
    Command,
    DeviceState,
    Frame,
    Identity,
    Limits,
    Parser,
    Rate,
    SetRate,
)

from firmware_bridge.announcement import FORMATS

__all__ = ["Core", "Device", "Limits"]

ROOM = 4096


def bits(value):
    """Return the bits of a double, as the core takes them."""
    return struct.unpack("<Q", struct.pack("<d", value))[0]


def channels_of(infos, width):
    half = 1 << (8 * width - 1)
    return (Channel * len(infos))(
        *[
            Channel(
                info.name.encode(),
                info.unit.encode(),
                bits(info.scale),
                bits(info.offset),
                -half if info.low is None else info.low,
                half - 1 if info.high is None else info.high,
            )
            for info in infos
        ]
    )


def identity_of(announcement):
    """Return the core's identity for a Python announcement."""
    width = FORMATS[announcement.format]
    return Identity(
        announcement.board.encode(),
        announcement.firmware.encode(),
        channels_of(announcement.channels, width),
        len(announcement.channels),
        width,
        announcement.simulated,
        announcement.clock_hz,
    )


class Core:
    """The functions of the core; each ``encode_…`` returns bytes, empty if the room is too small."""

    def __init__(self, library):
        self.library = c.CDLL(str(library))
        for name in ("frame", "announcement", "reply", "note", "lock_in"):
            getattr(self.library, f"pd_{name}_encode").restype = c.c_size_t
        for name in ("pd_device_answer", "pd_device_next"):
            getattr(self.library, name).restype = c.c_size_t
        self.library.pd_device_obey.restype = c.c_void_p
        self.library.pd_sin.argtypes = [c.c_uint32]
        self.library.pd_parser_push.restype = c.c_bool

    def _written(self, function, *arguments, room=ROOM):
        out = (c.c_uint8 * max(room, 1))()
        length = function(*arguments, out, c.c_size_t(room))
        return bytes(out[:length])

    def encode_frame(self, payload, room=ROOM, **fields):
        frame = Frame(kind=0x0101, **fields)  # samples, version 1
        return self._written(self.library.pd_frame_encode, c.byref(frame), payload, room=room)

    def encode_announcement(self, announcement, ratio, room=ROOM):
        identity, rate = identity_of(announcement), Rate(*ratio)
        return self._written(
            self.library.pd_announcement_encode,
            c.byref(identity),
            c.c_uint32(announcement.stream),
            c.byref(rate),
            c.c_uint16(announcement.slots),
            room=room,
        )

    def encode_reply(self, reply, room=ROOM):
        return self._written(
            self.library.pd_reply_encode,
            c.c_uint16(reply.request),
            c.c_uint8(reply.code),
            c.c_uint8(reply.status),
            reply.text.encode(),
            room=room,
        )

    def encode_note(self, text, room=ROOM):
        return self._written(self.library.pd_note_encode, text.encode(), room=room)

    def commands(self, data, size=64):
        """Return what the parser makes of bytes: commands, and the number of damaged pieces."""
        buffer, parser, found = (c.c_uint8 * size)(), Parser(), []
        self.library.pd_parser_init(c.byref(parser), buffer, c.c_size_t(size))
        for byte in data:
            command = Command()
            if self.library.pd_parser_push(c.byref(parser), c.c_uint8(byte), c.byref(command)):
                found.append(command)
        return found, parser.damaged


class Device:
    """A board made of the core, in memory; ``announcement`` says what it is."""

    def __init__(self, core, announcement, limits, *, blocks=4, seed=0, ratio=None):
        self.core, self.library = core, core.library
        self.board = Board(
            identity_of(announcement), limits, announcement.slots, SetRate(self.rate)
        )
        self.rate_wanted = None
        width, channels = FORMATS[announcement.format], len(announcement.channels)
        self.state = DeviceState()
        self._frames = (Frame * blocks)()
        self._payload = (c.c_uint8 * (blocks * announcement.slots * width * channels))()
        self.library.pd_ring_init(
            c.byref(self.state.ring),
            self._frames,
            self._payload,
            c.c_uint8(blocks),
            c.c_uint16(announcement.slots),
            c.c_uint8(channels),
            c.c_uint8(width),
        )
        rate = Rate(*(ratio or (int(announcement.rate_hz), 1)))
        self.library.pd_device_init(
            c.byref(self.state), c.byref(self.board), c.byref(rate), c.c_uint32(seed)
        )

    def rate(self, wanted):
        """Take any rate up to 10 kHz as it is."""
        self.rate_wanted = (wanted.contents.numerator, wanted.contents.denominator)
        return self.rate_wanted[0] <= 10_000 * self.rate_wanted[1]

    def obey(self, wire):
        """Return what the board answers to commands."""
        answer = b""
        for command in self.core.commands(wire)[0]:
            out = (c.c_uint8 * ROOM)()
            state, asked = c.byref(self.state), c.byref(command)
            refusal = c.c_void_p(self.library.pd_device_obey(state, asked))
            length = self.library.pd_device_answer(state, asked, refusal, out, c.c_size_t(ROOM))
            answer += bytes(out[:length])
        return answer

    def step(self, scan=(0, 0), clock=0, flags=0):
        """Go through one sample; return the DAC code."""
        code = self.library.pd_device_code(c.byref(self.state))
        self.library.pd_device_sample(
            c.byref(self.state),
            (c.c_int32 * len(scan))(*scan),
            c.c_uint64(clock),
            c.c_uint16(flags),
        )
        return code

    def miss(self):
        """Go through one sample that was not taken in time."""
        self.library.pd_device_miss(c.byref(self.state))

    def sample(self, value, clock=0):
        """Go through one sample with the drive, beside rest, as channel 1; return all it says."""
        code = self.library.pd_device_code(c.byref(self.state))
        scan = (c.c_int32 * 2)(value, code - self.board.drive.rest)
        self.library.pd_device_sample(c.byref(self.state), scan, c.c_uint64(clock), c.c_uint16(0))
        return self.drain()

    def next(self):
        """Return the next message that is due, empty if there is none."""
        out = (c.c_uint8 * ROOM)()
        length = self.library.pd_device_next(c.byref(self.state), out, c.c_size_t(ROOM))
        return bytes(out[:length])

    def drain(self):
        """Return all messages that are due."""
        return b"".join(iter(self.next, b""))
