"""How fast a recording on disk becomes lines and a spectrum, in how much memory, by its size.

Run with both cores::

    PYTHONPATH=tests python tests/benchmarks/bench_recordings.py [--bytes 1e10] [--folder /tmp]

Recordings of a thousandth, a hundredth, a tenth of that and all of it are written with eight lines in
noise. Each is opened with every CRC checked and decoded from int16, in a process of its own; rates are
per sample and count everything from opening to the result. numpy.sum stands beside, of 10⁸ float64 samples.
"""

import argparse
import contextlib
import io
import json
import os
import subprocess
import sys
import tempfile
import time
from pathlib import Path

import numpy as np
from big_recording import LINES_HZ, write_recording

LIMIT_MB = 300.0


def _child(command, path):
    """Run a command in this process; print its time and the memory that the process needed."""
    from metro.commandline import run

    if command == "sum":
        print(json.dumps({"rate": _sum_rate()}))
        return
    lines = (
        [word for f in LINES_HZ for word in ("--line", f"{f:g}Hz")] if command == "lines" else []
    )
    begin = time.perf_counter()
    with contextlib.redirect_stdout(io.StringIO()):
        code = run([command, path, "--channel", "pd", *lines, "--json", "--quiet"])
    took = time.perf_counter() - begin
    print(json.dumps({"code": code, "seconds": took, "peak_mb": _peak_mb()}))


def _peak_mb():
    """Return the peak memory of this process; ru_maxrss would begin with that of its parent."""
    status = Path("/proc/self/status")
    if status.exists():
        (line,) = (row for row in status.read_text().splitlines() if row.startswith("VmHWM"))
        return int(line.split()[1]) / 1024
    import resource

    return resource.getrusage(resource.RUSAGE_SELF).ru_maxrss / 1024


def measured(command, path):
    """Return exit code, seconds and peak memory [MB] of a command in a process of its own."""
    environment = os.environ | {"PYTHONPATH": str(Path(__file__).resolve().parents[1])}
    made = subprocess.run(
        [sys.executable, __file__, "--child", command, str(path)], env=environment,
        capture_output=True, text=True, check=True,
    )  # fmt: skip
    return json.loads(made.stdout)


def _sum_rate():
    values = np.ones(100_000_000)
    best = float("inf")
    for _ in range(5):
        begin = time.perf_counter()
        values.sum()
        best = min(best, time.perf_counter() - begin)
    return len(values) / best


def main():
    parser = argparse.ArgumentParser(description=__doc__.splitlines()[0])
    parser.add_argument("--bytes", type=float, default=1e9, help="of the largest recording")
    parser.add_argument("--drive", action="store_true", help="two channels, lines with their ratio")
    parser.add_argument("--folder", help="where there is room for it")
    parser.add_argument("--child", nargs=2, metavar=("COMMAND", "FILE"), help=argparse.SUPPRESS)
    arguments = parser.parse_args()
    if arguments.child:
        _child(*arguments.child)
        return 0
    print(f"numpy.sum {measured('sum', '')['rate'] / 1e6:.0f} million samples/s")
    print(f"{'bytes':>8s} {'samples':>12s} {'command':>9s} {'time':>9s} {'rate':>12s} {'peak':>8s}")
    too_much = 0
    for part in (1e-3, 1e-2, 1e-1, 1.0):
        with tempfile.TemporaryDirectory(dir=arguments.folder) as folder:
            path = Path(folder, "big.mfr")
            samples = write_recording(path, part * arguments.bytes, drive=arguments.drive)
            for command in ("lines", "spectrum"):
                found = min((measured(command, path) for _ in range(2)), key=lambda f: f["seconds"])
                too_much += found["peak_mb"] > LIMIT_MB or found["code"] != 0
                print(
                    f"{path.stat().st_size:8.1e} {samples:12d} {command:>9s} {found['seconds']:7.2f} s "
                    f"{samples / found['seconds'] / 1e6:8.1f} M/s {found['peak_mb']:5.0f} MB",
                    flush=True,
                )
    names = ("OPENBLAS_NUM_THREADS", "OMP_NUM_THREADS")
    threads = ", ".join(f"{name}={os.environ.get(name, 'not set')}" for name in names)
    print(f"cores {os.cpu_count()}; load {os.getloadavg()[0]:.1f}; {threads}")
    return 1 if too_much else 0


if __name__ == "__main__":
    sys.exit(main())
