"""The bridge beside its limits, in one run: rates of the codec, the recorder's share of a core, memory.

    PYTHONPATH=tests python tests/benchmarks/bench_bridge.py

Limits: recordings decode at 1 GB/s with every CRC checked; the wire decodes at 20 times the byte rate
of a 12 Mbit/s link, on one core; recording one hour of stream takes at most 120 MB of memory. Times are
CPU times, so that other programs on the machine count less. Ends with 1 beyond a limit.
"""

import sys
import tempfile
from pathlib import Path

from bench_codec import CASES, FORMATS, FRAME_BYTES, best, counts, decode_counts, live, write
from long_runs.processes import record_from

from firmware_bridge.frame import encode_stream
from firmware_bridge.recording import open_mfr

LINK_MB_S = 1.5  # 12 Mbit/s
MEMORY_MB = 120.0
HOUR_RATE_HZ = 10_000.0  # two channels, int16
NEAR_ZERO = ("int32, 0 and ±1", "int32", 2, 0.5)  # codes nearly all: the slowest there is


class Table:
    """Lines of what was measured beside its limit."""

    def __init__(self):
        self.beyond = 0

    def line(self, what, value, unit, limit=None, at_most=False, more=""):
        verdict = ""
        if limit is not None:
            is_within = value <= limit if at_most else value >= limit
            self.beyond += not is_within
            verdict = (
                f"{'<=' if at_most else '>='} {limit:g} {unit}: {'yes' if is_within else 'NO'}"
            )
        print(f"{what:44}{value:9.3g} {unit:6}{verdict:22}{more}", flush=True)


def bench_recordings(table):
    folder = "/dev/shm" if Path("/dev/shm").is_dir() else None  # noqa: S108
    with tempfile.TemporaryDirectory(dir=folder) as where:
        for name in FORMATS:
            path = Path(where) / "bench.mfr"
            write(path, counts(name, 2, 300.0, 60_000_000), name, 2)
            content = path.read_bytes()
            size, copy_s = len(content), best(lambda: bytearray(content))  # noqa: B023
            for what, action in (("to counts", decode_counts), ("opened", open_mfr)):
                took_s = best(lambda: action(path))  # noqa: B023  # called at once
                limit = 1.0 if what == "to counts" and name != "int24" else None
                more = f"{copy_s / took_s:.3f} of memcpy"
                table.line(
                    f"recording, {name}, {what}, CRCs checked",
                    size / took_s / 1e9,
                    "GB/s",
                    limit,
                    more=more,
                )


def bench_wire(table):
    for label, name, channels, deviation in [*CASES, NEAR_ZERO]:
        samples = counts(name, channels, deviation, 4_000_000)
        slots = FRAME_BYTES // (FORMATS[name] * channels)
        data = encode_stream(samples, slots=slots, format=name)
        decode_s = best(lambda: live(data))  # noqa: B023
        copy_s = best(lambda: bytearray(data))  # noqa: B023
        rate = len(data) / decode_s / 1e6
        limit = None if label == NEAR_ZERO[0] else 20 * LINK_MB_S
        more = f"{rate / LINK_MB_S:.0f} x 12 Mbit/s, {copy_s / decode_s:.4f} of memcpy"
        table.line(f"wire, 1 kB frames, {label}", rate, "MB/s", limit, more=more)


def record(samples, bytes_per_s, rate_hz):
    with tempfile.TemporaryDirectory() as folder:
        order = {"samples": samples, "bytes_per_s": bytes_per_s, "rate_hz": rate_hz}
        sent, recorded = record_from("steady_board", order, folder)
    if recorded["samples"] != sent["samples"]:
        raise RuntimeError(f"recorded {recorded['samples']} of {sent['samples']} samples")
    return sent, recorded


def bench_recorder(table):
    _, idle = record(100, 0, 1e5)
    sent, recorded = record(2_000_000, 1e6, 1e6 / 4.6)
    share = (recorded["cpu_s"] - idle["cpu_s"]) / sent["took_s"]
    table.line("recorder at 1 MB/s, 300 B frames", 100 * share, "% CPU")
    for minutes in (6, 60):
        sent, recorded = record(int(minutes * 60 * HOUR_RATE_HZ), 0, HOUR_RATE_HZ)
        more = f"{sent['bytes'] / 1e6:.0f} MB, {minutes * 60 / sent['took_s']:.0f} x real time"
        name = f"recorder's peak memory, {minutes} min of 2 x 10 kS/s"
        table.line(name, recorded["peak_mb"], "MB", MEMORY_MB, at_most=True, more=more)
        name = "the same with the recording read back"
        table.line(name, recorded["read_back_mb"], "MB", MEMORY_MB, at_most=True)


def main():
    table = Table()
    bench_recordings(table)
    bench_wire(table)
    bench_recorder(table)
    sys.exit(1 if table.beyond else 0)


if __name__ == "__main__":
    main()
