"""The live page under load: 50 kS/s of two channels, recorded and shown; memory, time and latency.

Run as ``PYTHONPATH=tests python -m long_runs.watch_hour --seconds 3600 [--speed 1] [--rate 50000]``. The
board, the program and the process that holds the port are three processes; this one is the page.
"""

import argparse
import asyncio
import json
import os
import subprocess
import sys
import tempfile
import time
from pathlib import Path

import numpy as np
from live_page import Program
from long_runs.lines_board import LINES_HZ, counts
from tornado.httpclient import HTTPRequest
from tornado.websocket import websocket_connect

from calibration.desk.watch.wire import unpack
from firmware_bridge.opening import open_recording

__all__ = ["GROWTH_MB", "LATENCY_S", "watch_under_load"]

GROWTH_MB, LATENCY_S = 5.0, 0.5
_EVERY_S = 2.0


class Usage:
    """Memory and time of a process and of what it has started."""

    def __init__(self, pid):
        self.pid, self.begun_s = pid, time.monotonic()
        self.memory_mb = []  # (time, server, holder of the port)

    def processes(self):
        """Return the process and its children."""
        children = Path(f"/proc/{self.pid}/task/{self.pid}/children").read_text().split()
        return [self.pid, *map(int, children)]

    def look(self):
        rows = [_resident_mb(pid) for pid in self.processes()]
        self.memory_mb.append((time.monotonic() - self.begun_s, rows[0], sum(rows[1:])))

    def growth_mb(self, after_s):
        """Return by how much the memory of both grew after a moment: last against first fifth."""
        table = np.array(self.memory_mb)
        table = table[table[:, 0] >= min(after_s, 0.3 * table[-1, 0])]
        fifth = max(1, len(table) // 5)
        grown = np.median(table[-fifth:], axis=0) - np.median(table[:fifth], axis=0)
        return float(grown[1]), float(grown[2])

    def cpu_s(self):
        """Return the time of the server and of the others."""
        rows = [_cpu_s(pid) for pid in self.processes()]
        return rows[0], sum(rows[1:])


def _resident_mb(pid):
    status = Path(f"/proc/{pid}/status").read_text()
    return int(status.split("VmRSS:")[1].split()[0]) / 1024


def _cpu_s(pid):
    fields = Path(f"/proc/{pid}/stat").read_text().rpartition(")")[2].split()
    return (int(fields[11]) + int(fields[12])) / os.sysconf("SC_CLK_TCK")


def watch_under_load(seconds, folder, *, rate_hz=50_000.0, speed=1.0, tell=lambda _line: None):
    """Let a board send, the program show and record; return what it took.

    Parameters
    ----------
    seconds : float
        Of the board's clock.
    folder : path
        For the port and the recording.
    rate_hz, speed : float
        Samples per second and channel, and how much faster than real time they come.
    tell : callable
        Takes a line of text from time to time.
    """
    order = {"rate_hz": rate_hz, "seconds": seconds, "speed": speed, "folder": str(folder)}
    board = subprocess.Popen(
        [sys.executable, "-m", "long_runs.lines_board", json.dumps(order)],
        stdin=subprocess.PIPE,
        stdout=subprocess.PIPE,
        text=True,
        env=os.environ | {"PYTHONPATH": str(Path(__file__).resolve().parents[1])},
    )
    with board:
        port = board.stdout.readline().strip()
        lines = [part for f in LINES_HZ for part in ("--line", f"{f:g}Hz")]
        program = Program(port, "--folder", folder, *lines)
        usage = Usage(program.process.pid)
        try:
            seen = asyncio.run(_look_on(program.url, board, usage, tell))
            server_s, holder_s = usage.cpu_s()
        finally:
            code, said = program.end()
            board.stdin.close()
    # The board has sent all and answers nothing: the program must say that it cannot know the drive.
    if code != 3 or not said.strip().endswith("whether the drive is at rest is not known"):
        raise RuntimeError(f"the program ended with {code}: {said}")
    wall_s = time.monotonic() - usage.begun_s
    growth = usage.growth_mb(60.0)
    return seen | {
        "recorded": _recorded(Path(folder) / "hour.mfr", rate_hz),
        "growth_server_mb": growth[0],
        "growth_holder_mb": growth[1],
        "memory_mb": max(a + b for _, a, b in usage.memory_mb),
        "server_share": server_s / wall_s,
        "holder_share": holder_s / wall_s,
        "wall_s": wall_s,
    }


async def _look_on(url, board, usage, tell):
    """Be the page: start the recording, read every message, end the recording when all is sent."""
    request = HTTPRequest(url.replace("http", "ws") + "live", headers={"Origin": url.rstrip("/")})
    live = await websocket_connect(request)
    await live.write_message(json.dumps({"do": "record", "name": "hour"}))
    sent = asyncio.create_task(asyncio.to_thread(board.stdout.readline))
    latencies, next_s, told_s, document = [], 0.0, time.monotonic(), None
    while not sent.done():
        message = await live.read_message()
        if message is None:
            raise RuntimeError("the page was cut off")
        if not isinstance(message, bytes):
            continue
        document, _ = unpack(message)
        latencies.append(document["latency_s"])
        if time.monotonic() >= next_s:
            usage.look()
            next_s = time.monotonic() + _EVERY_S
        if time.monotonic() >= told_s + 60.0:
            told_s = time.monotonic()
            tell(_line(document, latencies, usage))
    said = json.loads(sent.result())
    await _all_shown(live, said["samples"])
    await live.write_message(json.dumps({"do": "end recording"}))
    document = await _until(live, lambda d: d["recording"]["file"] is None)
    live.close()
    while await live.read_message() is not None:
        pass
    losses, source = document["losses"], document["source"]
    return {
        "sent": said["samples"],
        "board_late_s": said["late_s"],
        "shown": round(source["time_s"] * source["rate_hz"]),
        "gaps": losses["gaps"],
        "missing": losses["missing"],
        "messages": len(latencies),
        "latency_mean_s": float(np.mean(latencies)),
        "latency_99_s": float(np.quantile(latencies, 0.99)),
        "latency_worst_s": float(np.max(latencies)),
        "lines": [line["amplitude"] for line in document["lines"]],
    }


async def _all_shown(live, samples):
    await _until(live, lambda d: d["source"]["time_s"] * d["source"]["rate_hz"] > samples - 0.5)


async def _until(live, is_so):
    end_s = time.monotonic() + 30.0
    while time.monotonic() < end_s:
        message = await live.read_message()
        if isinstance(message, bytes):
            document, _ = unpack(message)
            if is_so(document):
                return document
    raise TimeoutError("the page does not come to what was waited for")


def _line(document, latencies, usage):
    _, server_mb, holder_mb = usage.memory_mb[-1]
    return (
        f"{document['source']['time_s']:8.1f} s shown, gaps {document['losses']['gaps']}, "
        f"memory {server_mb:.1f} + {holder_mb:.1f} MB, worst latency {max(latencies):.3f} s"
    )


def _recorded(path, rate_hz):
    """Return the samples of the recording, and how many differ from what the board sends."""
    recording = open_recording(path)
    second, wrong, first = counts(rate_hz), 0, None
    for block in recording.blocks(1 << 18):
        got = np.rint(block.values / 3e-4)
        if first is None:  # it begins somewhere in the stream
            first = _place(got[:2000], second)
        rows = (first + block.start_index + np.arange(len(got))) % len(second)
        wrong += int(np.count_nonzero(got != second[rows]))
    return {"samples": recording.length, "gaps": len(recording.gaps), "wrong": wrong}


def _place(values, second):
    """Return where in the second some samples stand."""
    tall = np.concatenate([second, second[: len(values)]])
    for start in np.flatnonzero(second[:, 0] == values[0, 0]):
        if np.array_equal(tall[start : start + len(values)], values):
            return int(start)
    raise AssertionError("the recording holds nothing that the board sends")


def main(arguments=None):
    """Print what a run took; end with 1 where a limit is broken."""
    parser = argparse.ArgumentParser(description=__doc__)
    parser.add_argument("--seconds", type=float, default=3600.0, help="of the board's clock")
    parser.add_argument(
        "--rate", type=float, default=50_000.0, help="samples per second and channel"
    )
    parser.add_argument("--speed", type=float, default=1.0, help="times real time")
    given = parser.parse_args(arguments)
    with tempfile.TemporaryDirectory() as folder:
        result = watch_under_load(
            given.seconds,
            folder,
            rate_hz=given.rate,
            speed=given.speed,
            tell=lambda line: print(line, flush=True),
        )
    result["load_average"] = os.getloadavg()  # of a machine that may have other things to do
    print(json.dumps(result, indent=2))
    good = (
        result["gaps"] == result["recorded"]["gaps"] == result["recorded"]["wrong"] == 0
        and result["shown"] == result["sent"]
        and max(result["growth_server_mb"], result["growth_holder_mb"]) < GROWTH_MB
        and result["latency_99_s"] < LATENCY_S
    )
    print("within the limits" if good else "NOT within the limits")
    return 0 if good else 1


if __name__ == "__main__":
    sys.exit(main())
