"""Rates of the wire and the recording beside a plain copy of the same bytes; run it by hand.

    python tests/benchmarks/bench_codec.py

Limits: live decode at least 20 times the byte rate of a 12 Mbit/s link (30 MB/s), recording decode
at least 1 GB/s with every CRC checked, encoding of a simulated board at least 30 MB/s.
"""

import resource
import tempfile
import time
from pathlib import Path

import numpy as np

from firmware_bridge.announcement import FORMATS, Announcement, ChannelInfo
from firmware_bridge.decoder import Decoder
from firmware_bridge.envelope import seal_rows
from firmware_bridge.frame import encode_stream, pack_frames
from firmware_bridge.record_file import RecordFile
from firmware_bridge.recording import open_mfr
from firmware_bridge.recording_header import Header
from firmware_bridge.writer import Writer

FRAME_BYTES = 1024
LIVE_PIECE = 4095  # what one read of a terminal brings at most
REPEATS = 5

# name, format, channels, standard deviation of the counts: few, some and many zero bytes
CASES = [
    ("int16, 12 bits", "int16", 2, 300.0),
    ("int16, full scale", "int16", 2, 10_000.0),
    ("int24, 18 bits", "int24", 2, 100_000.0),
    ("int32, 18 bits", "int32", 2, 100_000.0),
    ("int32, 8 bits", "int32", 2, 100.0),
    ("int16, all zero", "int16", 2, 0.0),
]


def best(action):
    """Shortest of some runs, in CPU time [s]: other programs on the machine count less."""
    times = []
    for _ in range(REPEATS):
        start = time.process_time()
        action()
        times.append(time.process_time() - start)
    return min(times)


def counts(name, channels, deviation, size_bytes):
    n = size_bytes // (FORMATS[name] * channels)
    rng = np.random.default_rng(7)
    dtype = np.int16 if name == "int16" else np.int32
    return np.rint(rng.normal(0, 1, (n, channels)) * deviation).astype(dtype)


def live(data):
    decoder = Decoder()
    for start in range(0, len(data), LIVE_PIECE):
        decoder.feed(data[start : start + LIVE_PIECE])


def bench_wire():
    print(
        f"{'wire, 1 kB frames':24}{'encode':>10}{'decode':>10}{'of memcpy':>11}{'x 12 Mbit/s':>13}"
    )
    for label, name, channels, deviation in CASES:
        samples = counts(name, channels, deviation, 4_000_000)
        slots = FRAME_BYTES // (FORMATS[name] * channels)
        data = encode_stream(samples, slots=slots, format=name)
        encode_s = best(lambda: encode_stream(samples, slots=slots, format=name))  # noqa: B023
        decode_s = best(lambda: live(data))  # noqa: B023  # called at once
        copy_s = best(lambda: bytearray(data))  # noqa: B023
        size = len(data) / 1e6
        print(
            f"{label:24}{size / encode_s:6.0f} MB/s{size / decode_s:5.0f} MB/s"
            f"{copy_s / decode_s:11.4f}{size / decode_s / 1.5:13.0f}"
        )


def write(path, samples, name, channels):
    slots = FRAME_BYTES // (FORMATS[name] * channels)
    announced = Announcement(
        1, 1e5, name, slots, [ChannelInfo(f"c{k}", "V", 1e-4) for k in range(channels)]
    )
    writer = Writer(path, Header(announced), overwrite=True)
    step = 4096 * slots
    for first in range(0, len(samples), step):
        rows = pack_frames(
            samples[first : first + step],
            slots=slots,
            first_index=first,
            first_sequence=first // slots,
            stream=1,
            clock=0,
            flags=0,
            format=name,
        )
        for row in seal_rows(rows):
            writer.append(row.tobytes())
    writer.close()


def decode_counts(path):
    file = RecordFile(path)
    total = 0
    for chunk in file.chunks():
        total += len(file.counts(chunk.records))
    file.close()
    return total


def bench_recording():
    print(
        f"\n{'recording, 1 kB records':24}{'counts':>10}{'open':>10}{'trace':>10}{'of memcpy':>11}"
    )
    folder = "/dev/shm" if Path("/dev/shm").is_dir() else None  # noqa: S108
    with tempfile.TemporaryDirectory(dir=folder) as where:
        for name in FORMATS:
            path = Path(where) / "bench.mfr"
            write(path, counts(name, 2, 300.0, 60_000_000), name, 2)
            content = path.read_bytes()
            size = len(content) / 1e6
            counts_s = best(lambda: decode_counts(path))  # noqa: B023
            open_s = best(lambda: open_mfr(path))  # noqa: B023
            recording = open_mfr(path)
            trace_s = best(lambda: recording.trace("c0"))  # noqa: B023
            copy_s = best(lambda: bytearray(content))  # noqa: B023
            print(
                f"{name:24}{size / counts_s:5.0f} MB/s{size / open_s:5.0f} MB/s"
                f"{size / trace_s:5.0f} MB/s{copy_s / counts_s:11.3f}"
            )
    print(
        "counts and open check every CRC; trace gives float64 of one channel, CRCs checked before"
    )


if __name__ == "__main__":
    bench_wire()
    bench_recording()
    print(f"peak memory {resource.getrusage(resource.RUSAGE_SELF).ru_maxrss / 1024:.0f} MB")
