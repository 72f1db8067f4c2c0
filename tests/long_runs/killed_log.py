"""A log killed at a random moment, over and over: what it left, and that the next one goes on."""

import argparse
import contextlib
import os
import random
import signal
import subprocess
import sys
import tempfile
import threading
import time
from pathlib import Path

import numpy as np
from wire_board import RATE_HZ, announced, asked_board

from calibration.desk.ledger import Ledger
from calibration.desk.log_folder import LogFolder, Retention
from firmware_bridge.announcement import Announcement, ChannelInfo
from firmware_bridge.opening import open_recording
from firmware_bridge.recording_header import RecordingError

__all__ = ["kill_repeatedly", "without_drive"]

_RAMP = 2**15  # where the first channel of the board's ramp begins anew
_EVERY_S = 0.5
_LATE_S = 1.0
"""What a fit may take on a machine that is busy; until then its samples are in the recordings."""


def without_drive(stream, **settings):
    """Announce the ramp on a channel beside which there is no drive."""
    plain = announced(stream, **settings)
    channels = [ChannelInfo("pd", "V", 0.5), ChannelInfo("count", "V", 1.0)]
    return Announcement(
        stream, plain.rate_hz, "int16", plain.slots, channels, board="test", clock_hz=1_000_000
    )


class _Sent:
    """What the board had sent, and when."""

    def __init__(self, board):
        self._board, self._stop = board, threading.Event()
        self._seen = []
        self._thread = threading.Thread(target=self._look, daemon=True)
        self._thread.start()

    def _look(self):
        while not self._stop.wait(0.01):
            self._seen.append((time.monotonic(), self._board.next))

    def before(self, moment_s):
        return max((n for t, n in self._seen if t <= moment_s), default=0)

    def close(self):
        self._stop.set()
        self._thread.join()


def kill_repeatedly(count, seed, folder, log=sys.stderr):
    """Kill a log ``count`` times and raise where anything older than a second is lost.

    Parameters
    ----------
    count, seed : int
        How often, and where random moments come from.
    folder : Path
        An empty folder.
    log : file
        Takes a line a kill.

    Returns
    -------
    list of (float, int, int)
        For each kill: seconds since the start, samples recorded, line results kept.
    """
    rng = random.Random(seed)  # noqa: S311  # moments, no secrets
    found = []
    for number in range(count):
        place = folder / f"{number:03d}"
        place.mkdir()
        found.append(_kill_once(place, rng.uniform(0.2, 2.5)))
        after_s, samples, results = found[-1]
        print(f"{number + 1}: {after_s:.2f} s, {samples} samples, {results} results", file=log)
    return found


def _kill_once(place, after_s):
    with asked_board(says=without_drive) as board, contextlib.closing(_Sent(board.board)) as sent:
        process = _start(place, board.link.port)
        try:
            _wait_for_samples(place, process)
            time.sleep(after_s)
            killed_s, killed_unix_s = time.monotonic(), time.time()
            process.send_signal(signal.SIGKILL)
        finally:
            process.kill()
            process.wait()
        due = sent.before(killed_s - 1.0)
    samples = _check_recordings(place, due)
    results = _check_ledger(place, due, killed_unix_s)
    _check_that_another_goes_on(place)
    return after_s, samples, results


def _start(place, port, *more):
    command = [
        *(sys.executable, "-m", "metro", "log", port, "--out", str(place / "bench")),
        *("--ledger", str(place / "l.ledger"), "--line", "87.1Hz", f"--every={_EVERY_S}s"),
        *("--rotate-every=0.7s", *more),
    ]
    with (place / "said.txt").open("a") as said:
        return subprocess.Popen(
            command, stdout=said, stderr=said, env=os.environ | {"OMP_NUM_THREADS": "1"}
        )


def _wait_for_samples(place, process):
    begun_s = time.monotonic()
    while not list(place.glob("*.mfr")):
        if process.poll() is not None or time.monotonic() - begun_s > 60:
            raise RuntimeError((place / "said.txt").read_text())
        time.sleep(0.005)


def _values(place):
    """Return the ramp in the recordings of a folder, one after the other."""
    paths = LogFolder(place / "bench", Retention()).recordings()
    parts = []
    for path in paths:
        try:
            recording = open_recording(path)
        except RecordingError as error:
            if path == paths[-1] and "holds no sample" in str(error):
                continue  # killed between its header and its first frame
            raise
        if recording.length:
            span = recording.read([0, 1], 0, recording.length).values
            parts.append(np.rint(span[:, 0] / 0.5) + _RAMP * np.rint(span[:, 1]))
    return np.concatenate(parts) if parts else np.zeros(0)


def _check_recordings(place, due):
    values = _values(place)
    if len(values) and not np.array_equal(values, values[0] + np.arange(len(values))):
        raise AssertionError(f"{place}: the recordings are not one row")
    last = int(values[-1]) + 1 if len(values) else 0
    if last < due:
        raise AssertionError(f"{place}: {due} samples were older than 1 s, {last} are there")
    return len(values)


def _check_ledger(place, due, killed_unix_s):
    """Every result that the log spoke of is there, and so is each of a stretch long over."""
    with Ledger(str(place / "l.ledger"), create=False) as ledger:
        entries = ledger.line_results()
    said = (place / "said.txt").read_text().count("info: 87.1 Hz: ")
    if len(entries) < said:
        raise AssertionError(f"{place}: of {said} results that were told {len(entries)} are kept")
    over = int(due / (RATE_HZ * _EVERY_S)) - round(_LATE_S / _EVERY_S)
    if len(entries) < over:
        raise AssertionError(f"{place}: of {over} stretches {len(entries)} results are kept")
    if any(entry.unix_s > killed_unix_s for entry in entries):
        raise AssertionError(f"{place}: a result from after the kill")
    return len(entries)


def _check_that_another_goes_on(place):
    before = set(place.glob("*.mfr"))
    with asked_board(says=without_drive, stream=7) as board:
        process = _start(place, board.link.port, "--duration=0.6s")
        if process.wait(60) != 0:
            raise AssertionError((place / "said.txt").read_text())
    if not set(place.glob("*.mfr")) > before:
        raise AssertionError(f"{place}: the next log made no recording")


def main():
    """Run from the command line: kills, and a line for each."""
    parser = argparse.ArgumentParser(description=__doc__)
    parser.add_argument("--count", type=int, default=100)
    parser.add_argument("--seed", type=int, default=1)
    arguments = parser.parse_args()
    with tempfile.TemporaryDirectory() as folder:
        found = kill_repeatedly(arguments.count, arguments.seed, Path(folder), sys.stdout)
    print(f"{len(found)} kills: nothing older than a second was lost")


if __name__ == "__main__":
    main()
