"""Time and memory of converting recordings of growing size, each in a process of its own.

    PYTHONPATH=tests python tests/benchmarks/bench_convert.py --bytes 1e9 --folder /somewhere/with/room

A recording of int16 becomes eight times as much NPZ. The table holds the peak of memory (ru_maxrss),
which must not grow with the recording; the command fails where it exceeds 300 MB.
"""

import argparse
import json
import os
import resource
import subprocess
import sys
import tempfile
import time
from pathlib import Path

LIMIT_MB = 300
SAMPLE = Path(__file__).parents[1] / "calibration" / "samples" / "calibration-1.json"


def _child(recording, calibration, out):
    from metro.commandline import run

    begin = time.perf_counter()
    code = run(["convert", recording, "--calibration", calibration, "--out", out, "--quiet"])
    took = time.perf_counter() - begin
    peak_mb = resource.getrusage(resource.RUSAGE_SELF).ru_maxrss / 1024
    print(json.dumps({"code": code, "seconds": took, "peak_mb": peak_mb}))


def wide_calibration(path):
    """The kept sample with extremes that hold the made recordings on their slope."""
    document = json.loads(SAMPLE.read_text(encoding="utf-8"))
    for name, volts in (("low", -2.0), ("high", 2.0)):
        document["extremes"][name]["value"] = volts
    path.write_text(json.dumps(document), encoding="utf-8")


def measured(*arguments):
    """Return exit code, seconds and peak memory [MB]; this process stays small for its children."""
    made = subprocess.run(
        [sys.executable, __file__, "--child", *map(str, arguments)],
        capture_output=True,
        text=True,
        check=True,
    )
    return json.loads(made.stdout.splitlines()[-1])


def main():
    parser = argparse.ArgumentParser(description=__doc__.splitlines()[0])
    parser.add_argument("--bytes", type=float, default=1e9, help="of the largest recording")
    parser.add_argument("--folder", help="where there is room for nine times that")
    parser.add_argument("--child", nargs=3, help=argparse.SUPPRESS)
    arguments = parser.parse_args()
    if arguments.child:
        _child(*arguments.child)
        return 0
    from big_recording import write_recording

    print(f"{'bytes':>8s} {'samples':>12s} {'time':>9s} {'rate':>10s} {'peak':>8s}")
    too_much = 0
    for part in (1e-2, 1e-1, 1.0):
        with tempfile.TemporaryDirectory(dir=arguments.folder) as folder:
            recording, calibration = Path(folder, "big.mfr"), Path(folder, "cal.json")
            samples = write_recording(recording, part * arguments.bytes)
            wide_calibration(calibration)
            found = measured(recording, calibration, Path(folder, "out.npz"))
            too_much += found["peak_mb"] > LIMIT_MB or found["code"] != 0
            print(
                f"{recording.stat().st_size:8.1e} {samples:12d} {found['seconds']:7.1f} s "
                f"{samples / found['seconds'] / 1e6:6.1f} M/s {found['peak_mb']:5.0f} MB",
                flush=True,
            )
    print(f"cores {os.cpu_count()}; load {os.getloadavg()[0]:.1f}")
    return 1 if too_much else 0


if __name__ == "__main__":
    sys.exit(main())
