"""What is fuzzed: for each target how inputs are made, what is done with one, which errors it names.

A target is an object with ``make(rng)``, which returns the next input, and ``run(data)``, which
raises what must not be raised.
"""

import atexit
import os
import struct
import tempfile
from pathlib import Path
from zlib import crc32

import numpy as np
from long_runs.fuzz_bytes import mutated, mutated_text

import firmware_bridge.simulated as simulated
from firmware_bridge import opening
from firmware_bridge.announcement import Announcement, ChannelInfo, pack_announcement
from firmware_bridge.decoder import Decoder, Discarded, Samples
from firmware_bridge.envelope import Unwrapper, seal, wrap
from firmware_bridge.errors import BridgeError
from firmware_bridge.frame import encode_frame
from firmware_bridge.host_note import End, Join, Remark, Stamp, cut, seal_host_note
from firmware_bridge.lock_in_recording import LockInRecording
from firmware_bridge.message import (
    LockIn,
    Reply,
    encode_command,
    encode_lock_in,
    encode_note,
    encode_reply,
)
from firmware_bridge.message_head import MessageType
from firmware_bridge.recording import open_mfr
from firmware_bridge.recording_header import Header, encode_header
from firmware_bridge.text_frames import TextFramer
from metro.bench import load_bench
from metro.errors import MidfringeError

__all__ = [
    "TARGETS",
    "BenchTarget",
    "DecoderTarget",
    "LinesTarget",
    "RecordingTarget",
    "TextTarget",
]

_READ = 4000  # samples at either end of a recording


def _scratch_folder():
    """Return a folder, in memory where there is such a thing, that goes when the program ends."""
    memory = "/dev/shm"  # noqa: S108
    folder = tempfile.TemporaryDirectory(dir=memory if os.access(memory, os.W_OK) else None)
    atexit.register(folder.cleanup)
    return Path(folder.name)


def _announced(name, slots, channels):
    infos = [ChannelInfo(f"c{k}", "V", 1e-4 * (k + 1), 0.1 * k) for k in range(channels)]
    return Announcement(7, 1000.0, name, slots, infos, board="bench", clock_hz=1_000_000)


def _frame(name, slots, channels, k, filled=None, flags=0, stream=7):
    n = slots if filled is None else filled
    counts = (np.arange(n * channels, dtype=np.int64).reshape(n, channels) * 977 + k * 31) % 3001
    dtype = np.int16 if name == "int16" else np.int32
    return encode_frame(
        counts.astype(dtype), index=k * slots, sequence=k, stream=stream, clock=k, slots=slots,
        flags=flags, format=name,
    )  # fmt: skip


def _wires():
    lock_in = LockIn(7, 2**40, 400, 1, 14, ((8589934, -(2**40), 3), (1, 0, 2**60)))
    wires = [wrap(pack_announcement(_announced("int16", 8, 2)))]
    wires += [encode_note("laser warm ✓"), encode_command(1, 4), encode_reply(Reply(2, 9, 2, "no"))]
    wires += [encode_lock_in(lock_in)]
    for name in ("int16", "int24", "int32"):
        wires += [_frame(name, 8, 2, k) for k in range(6)]
    wires += [_frame("int16", 8, 2, 9, filled=3, flags=3), _frame("int16", 8, 2, 0, stream=8)]
    return wires


def _contents(wires):
    return [piece[:-4] for piece in Unwrapper().feed(b"".join(wires)) if isinstance(piece, bytes)]


class DecoderTarget:
    """Bytes of the wire: whole messages, damaged ones, and damaged contents with a CRC that fits."""

    batch = 20_000

    def __init__(self):
        self._wires = _wires()
        self._contents = _contents(self._wires)
        self._count = 0

    def make(self, rng):
        parts = []
        for _ in range(rng.choice((1, 2, 2, 3, 5))):
            kind = rng.random()
            if kind < 0.3:
                parts.append(rng.choice(self._wires))
            elif kind < 0.65:
                parts.append(wrap(mutated(rng, rng.choice(self._contents), self._contents)))
            elif kind < 0.95:
                parts.append(mutated(rng, rng.choice(self._wires), self._wires))
            else:
                parts.append(rng.randbytes(rng.randrange(60)))
        return b"".join(parts)

    def run(self, data):
        decoder = Decoder(window=2)
        events = decoder.feed(data) + decoder.close()
        lost = sum(event.count for event in events if isinstance(event, Discarded))
        assert lost <= len(data), "more discarded than came"
        self._count += 1
        if self._count % 8 == 0:  # the same events however the bytes are cut
            decoder, place = Decoder(window=2), len(data) * (self._count % 7) // 7
            again = decoder.feed(data[:place]) + decoder.feed(data[place:]) + decoder.close()
            assert list(map(_plain, again)) == list(map(_plain, events)), "cut differently"


def _plain(event):
    if isinstance(event, Samples):
        return (event.stream, event.index, event.data.tobytes(), event.over_range, event.clock)
    return repr(event)  # a NaN in an announcement is not equal to itself


_LINES = [
    b"17, 2.5\r\nboard v1\r\n" + b"".join(b"%d, %.2f\r\n" % (k, k / 4) for k in range(20)),
    b"".join(b"%.3f;%d;%d\n" % (k / 7, -k, k * k) for k in range(14)),
    b"".join(b"%d\t%.1e\n" % (k, 10.0**k) for k in range(12)),
    b"".join(b"%d,%02d;%d,5\n" % (k, k, -k) for k in range(12)),
    b"t_ms,pd,drive\n" + b"".join(b"%d,%.3f,%d\n" % (k * 10, k % 5 / 3, k % 2) for k in range(25)),
    b"# mV\n" + b"".join(b"n=%d v=%.2f\n" % (k % 256, k / 3) for k in range(20)),
    b"".join(b"%d %d\n" % (k * 1000 + (k > 12) * 7000, k) for k in range(25)),
    b"12:00:00.1;5\n" + b"".join(b"12:00:%02d.0;%d\n" % (k, k) for k in range(15)),
    b"ready\n\nok\n" + b"".join(b"%d\n" % (k % 3) for k in range(30)),
]


class LinesTarget:
    """Lines of numbers as they arrive, cut anywhere, with the host's clock beside them."""

    batch = 5_000

    def make(self, rng):
        data = rng.choice(_LINES)
        if rng.random() < 0.9:
            data = mutated_text(rng, data, _LINES)
        return bytes([rng.randrange(256)]) + data  # the first byte says how it is cut and stamped

    def run(self, data):
        how, data = (data[0], data[1:]) if data else (0, b"")
        framer = TextFramer(5, None if how & 1 else 100.0)
        decoder = Decoder()
        step = (len(data) + 1, 7, 40, 200)[how >> 1 & 3]
        now_s = 100.0
        for start in range(0, len(data), step):
            now_s += (0.0, 0.01, 0.3, 3.0)[how >> 3 & 3]
            if how & 0x80 and start:
                framer.restart()
            self._take(decoder, framer.feed(data[start : start + step], now_s))
        self._take(decoder, framer.tick(now_s + 1.0))

    @staticmethod
    def _take(decoder, pieces):
        for piece in pieces:
            if isinstance(piece, bytes) and piece[0] < MessageType.PIECE:
                bad = [e for e in decoder.accept(piece) if isinstance(e, Discarded)]
                assert not bad, f"its own message is refused: {bad[0].reason}"


_TABLES = [
    b"time,photodiode,drive\ns,V,V\n" + b"".join(b"%.3f,%.4f,%d\n" % (k / 1e3, k % 7 / 3, k % 2) for k in range(30)),
    b"".join(b"%d;%d,%03d\r\n" % (k, k % 5, k * 37 % 1000) for k in range(30)),
    b"# rate: 1 kHz\n" + b"".join(b"%.3e\t%.3e\n" % (k % 4 - 1.5, k) for k in range(30)),
    b"2024-03-01 12:00:00.%03d,5\n" * 3 % (0, 100, 200) + b"2024-03-01 12:00:00.300,6\n",
    b"".join(b"%5d %5d\n" % (k, k * k) for k in range(30)) + b"\nsecond,part\n1,2\n3,4\n",
    "t (s),µ (mV)\n".encode() + b"".join(b"%.2f,%d\n" % (k / 100, k) for k in range(20)),
    "a,b\n1,2\n2,3\n3,4\n".encode("utf-16"),
    b"Sample Interval,0.001\n\nTIME,CH1\n" + b"".join(b"%g,%g\n" % (k * 1e-3, k) for k in range(15)),
]  # fmt: skip


class TextTarget:
    """CSV and text files, read whole."""

    batch = 1_000

    def make(self, rng):
        data = rng.choice(_TABLES)
        change = mutated_text if rng.random() < 0.9 else mutated
        return change(rng, data, _TABLES)

    def run(self, data):
        try:
            recording = opening._open(
                data, "input", None, 1000.0 if len(data) % 3 == 0 else None, False
            )
            _read(recording)
        except BridgeError as error:
            _check_line(error)


def _read(recording):
    everything = list(range(len(recording.channels)))
    if recording.length < 0 or any(gap.length < 0 for gap in recording.gaps):
        raise AssertionError("a negative length")
    recording.read(everything, 0, min(_READ, recording.length))
    recording.read(everything, max(0, recording.length - _READ), recording.length)


def _check_line(error):
    text = str(error)
    assert text, "an error without words"
    assert "\n" not in text, f"more than one line: {text!r}"


def _pieces(message, record_bytes):
    return [message] if len(message) <= record_bytes else cut(message, 1, record_bytes)


class RecordingTarget:
    """Recordings: damaged anywhere, or in a header or record whose CRC is made to fit again."""

    batch = 2_000

    def __init__(self):
        self._path = _scratch_folder() / "input.mfr"
        self._files = [
            self._recording(*how) for how in (("int16", 8, 2), ("int24", 5, 1), ("int32", 3, 3))
        ]

    @staticmethod
    def _recording(name, slots, channels):
        header = Header(_announced(name, slots, channels), 10**18, {"port": "x"})
        long_note = _contents([encode_note("x" * 200)])[0]
        messages = [seal_host_note(Join(7, 0, 0, 0.0)), seal_host_note(Stamp(1, 2, 7, 8, 9))]
        wires = [_frame(name, slots, channels, k) for k in (0, 1, 2, 4, 3, 3, 7)]
        wires += [_frame(name, slots, channels, 8, filled=2, flags=1)]
        wires += [_frame(name, slots, channels, k, stream=8) for k in (0, 1)]
        messages += [seal(content) for content in _contents(wires)]
        messages += [seal_host_note(Join(8, 0, 100, 3.0)), seal_host_note(Remark("hm"))]
        steps = ((8589934, -(2**40), 3), (1, 0, 2**30))
        results = [LockIn(7, 40 * k, 40, 0, 14, steps[: 1 + k % 2]) for k in (0, 1, 3)]
        messages += [
            part
            for content in _contents(list(map(encode_lock_in, results)))
            for part in _pieces(seal(content), header.record_bytes)
        ]
        messages += cut(seal(long_note), 0, header.record_bytes)
        messages += [seal_host_note(End(8, slots * 4))]
        step = header.record_bytes
        return encode_header(header), step, [message.ljust(step, b"\0") for message in messages]

    def make(self, rng):
        header, step, records = rng.choice(self._files)
        records = list(records)
        kind = rng.random()
        if kind < 0.25:
            header = self._sealed(mutated(rng, header[:-4], [header]), len(header))
        elif kind < 0.8:
            for _ in range(rng.choice((1, 1, 2, 4))):
                k = rng.randrange(len(records))
                content = mutated(rng, self._content(records[k]), records)
                records[k] = seal(content)[:step].ljust(step, b"\0")
            if rng.random() < 0.3:
                rng.shuffle(records)
        whole = header + b"".join(records)
        return whole if kind < 0.8 else mutated(rng, whole, [whole])

    @staticmethod
    def _content(record):
        """Return a record's message without CRC and padding."""
        if record[0] == 1:
            channels, width, slots = struct.unpack_from("<BBH", record, 12)
            return record[: 36 + slots * channels * width]
        return record[: 4 + int.from_bytes(record[2:4], "little")]

    @staticmethod
    def _sealed(content, length):
        content = content[: length - 4].ljust(length - 4, b"\0")
        return content + crc32(content).to_bytes(4, "little")

    def run(self, data):
        self._path.write_bytes(data)
        for opened in (open_mfr, LockInRecording):
            try:
                _read(opened(self._path))
            except BridgeError as error:
                _check_line(error)


class BenchTarget:
    """Bench files: lines left out, values and units changed, text damaged."""

    batch = 500

    def __init__(self):
        self._path = _scratch_folder() / "input.toml"
        text = Path(simulated.__file__).with_name("bench.toml").read_bytes()
        lines = [line.split(b"#")[0].rstrip() for line in text.split(b"\n")]
        self._lines = [line for line in lines if line]
        self._values = [line.split(b"=", 1)[1] for line in self._lines if b"=" in line]

    def make(self, rng):
        part = rng.choice((0.1, 0.3, 0.6))
        lines, is_whole = [], False
        for line in self._lines:
            if line.startswith(b"["):
                is_whole = line.startswith(b"[[")  # which want all of their keys
            if is_whole or line.startswith(b"[") or rng.random() < part:
                lines.append(line)
        for _ in range(rng.choice((0, 1, 1, 2))):
            k = rng.randrange(len(lines))
            key, _, value = lines[k].partition(b"=")
            if value:
                lines[k] = key + b"=" + self._value(rng, value)
        data = b"\n".join(lines) + b"\n"
        return mutated_text(rng, data, [data]) if rng.random() < 0.3 else data

    def _value(self, rng, value):
        kind = rng.random()
        if kind < 0.3:
            return rng.choice(self._values)
        if kind < 0.4:
            return mutated_text(rng, value, self._values)
        # within the first quotes, so that it stays TOML and reaches what reads values
        before, quote, rest = value.partition(b'"')
        inside, _, behind = rest.partition(b'"')
        if not quote:
            return b' "' + mutated_text(rng, value.strip(), self._values).replace(b'"', b"") + b'"'
        changed = mutated_text(rng, inside, self._values).replace(b'"', b"").replace(b"\\", b"")
        return before + b'"' + changed + b'"' + behind

    def run(self, data):
        self._path.write_bytes(data)
        try:
            bench = load_bench(self._path)
            bench.provenance()
        except MidfringeError as error:
            _check_line(error)


TARGETS = {
    "decoder": DecoderTarget,
    "lines": LinesTarget,
    "text": TextTarget,
    "recording": RecordingTarget,
    "bench": BenchTarget,
}
