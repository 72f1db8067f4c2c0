"""The wire on a board that runs MicroPython: messages to the host, commands from it."""

import struct
from binascii import crc32

VERSION = 1
SAMPLES, ANNOUNCEMENT, COMMAND, REPLY, NOTE = 1, 2, 3, 4, 6
IDENTIFY, START, STOP, RATE, SET_LINE, CLEAR_LINE, RAMP, KEEP_ALIVE = 1, 2, 3, 4, 5, 6, 7, 8
DONE, UNKNOWN, REFUSED = 0, 1, 2
OVER_RANGE, OVERRUN = 1, 2

COMMAND_MAX = 64
_RUN = 254  # longest run behind one code byte


def stuffed(data: bytes) -> bytes:
    """Return a message without zero bytes (consistent overhead byte stuffing)."""
    runs = data.split(b"\0")
    last = len(runs) - 1
    out = bytearray()
    for number, run in enumerate(runs):
        # A last run of exactly 254 bytes gets no further code byte; one before a zero does.
        while len(run) > _RUN or (len(run) == _RUN and number < last):
            out.append(255)
            out.extend(run[:_RUN])
            run = run[_RUN:]
        out.append(len(run) + 1)
        out.extend(run)
    return bytes(out)


def unstuffed(data: bytes) -> bytes:
    """Return what was stuffed; empty if the code bytes do not fit."""
    out = bytearray()
    place = 0
    while place < len(data):
        code = data[place]
        if place + code > len(data):
            return b""
        out.extend(data[place + 1 : place + code])
        place += code
        if code != 255 and place < len(data):
            out.append(0)
    return bytes(out)


def wrapped(content: bytes) -> bytes:
    """Return a message as it goes over the wire: sealed, stuffed, between two zero bytes."""
    return b"\0" + stuffed(content + struct.pack("<I", crc32(content))) + b"\0"


def message(kind: int, body: bytes) -> bytes:
    """Return a message of any type but samples as it goes over the wire."""
    return wrapped(struct.pack("<BBH", kind, VERSION, len(body)) + body)


def frame(
    stream: int,
    sequence: int,
    index: int,
    clock: int,
    flags: int,
    channels: int,
    slots: int,
    samples: bytes,
) -> bytes:
    """Return a samples frame of 16-bit samples, packed channel by channel, as it goes out."""
    filled = len(samples) // (2 * channels)
    head = struct.pack(
        "<BBHIIBBHQQHH",
        SAMPLES,
        VERSION,
        flags,
        stream,
        sequence,
        channels,
        2,
        slots,
        index,
        clock,
        filled,
        0,
    )
    return wrapped(head + samples + bytes(2 * channels * slots - len(samples)))


def _text(text: str) -> bytes:
    data = text.encode()
    return bytes([len(data)]) + data


def announcement(identity: dict, stream: int, rate: tuple, slots: int) -> bytes:
    """Return the announcement of one stream.

    identity: board, firmware, clock_hz, is_simulated, channels (tuples of name, unit, scale,
    offset, low, high); rate: numerator and denominator.
    """
    channels = identity["channels"]
    body = struct.pack("<IQQI", stream, rate[0], rate[1], identity["clock_hz"])
    # 1.0 as a double, whatever floats this board has: its clock runs in real time
    body += b"\0\0\0\0\0\0\xf0\x3f"
    body += struct.pack("<HBBHH", identity["is_simulated"], 2, len(channels), slots, 0)
    body += _text(identity["board"]) + _text(identity["firmware"])
    for name, unit, scale, offset, low, high in channels:
        body += struct.pack("<ddii", scale, offset, low, high) + _text(name) + _text(unit)
    return message(ANNOUNCEMENT, body)


def reply(request: int, code: int, status: int, text: str) -> bytes:
    """Return the answer to a command."""
    return message(REPLY, struct.pack("<HBB", request, code, status) + text.encode())


class Parser:
    """Bytes from the host in, commands out: tuples of request, code and arguments."""

    def __init__(self) -> None:
        self._held = bytearray()

    def feed(self, data: bytes) -> list:
        """Return the commands that these bytes complete."""
        found = []
        for byte in data:
            if byte:
                # One more than fits: too long stays too long, and bounded.
                if len(self._held) <= COMMAND_MAX + 1:
                    self._held.append(byte)
                continue
            command = _command(unstuffed(bytes(self._held))) if self._held else None
            self._held = bytearray()
            if command is not None:
                found.append(command)
        return found


def _command(content: bytes) -> tuple | None:
    size = len(content)
    if not 12 <= size <= COMMAND_MAX:
        return None
    if struct.unpack("<I", content[-4:])[0] != crc32(content[:-4]):
        return None
    kind, version, length, request, code, _ = struct.unpack("<BBHHBB", content[:8])
    if kind != COMMAND or version != VERSION or length != size - 8:
        return None
    return request, code, content[8:-4]
