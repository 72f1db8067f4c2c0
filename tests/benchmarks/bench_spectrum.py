"""How fast the spectral density is, beside scipy's on the same samples.

env -u OPENBLAS_CORETYPE python tests/benchmarks/bench_spectrum.py [samples]
"""

import os
import resource
import sys
import time

import numpy as np
from scipy import signal

from calibration.welch import WelchSum

CHUNK = 1 << 20


def _ours(values, segment):
    total = WelchSum(segment, 1.0)
    for first in range(0, len(values), CHUNK):
        total.add(values[first : first + CHUNK])
    return total.result().power


def _rate(samples, run, repeats=5):
    """Return the best rate of several runs [samples/s]: what else the machine does only slows."""
    best = float("inf")
    for _ in range(repeats):
        begin = time.perf_counter()
        run()
        best = min(best, time.perf_counter() - begin)
    return samples / best


def main():
    samples = int(float(sys.argv[1])) if len(sys.argv) > 1 else 20_000_000
    values = np.random.default_rng(1).standard_normal(samples)
    print(f"{'segment':>8s} {'here':>12s} {'scipy.signal.welch':>20s}  ratio")
    for segment in (1024, 4096, 16384, 65536):
        ours = _rate(samples, lambda: _ours(values, segment))  # noqa: B023  # called at once
        theirs = _rate(samples, lambda: signal.welch(values, 1.0, "hann", segment), 3)  # noqa: B023
        print(f"{segment:8d} {ours / 1e6:8.1f} M/s {theirs / 1e6:16.1f} M/s  {ours / theirs:5.2f}")
    peak = resource.getrusage(resource.RUSAGE_SELF).ru_maxrss / 1e6
    print(f"cores {os.cpu_count()}; load {os.getloadavg()[0]:.1f}; peak {peak:.2f} GB")


if __name__ == "__main__":
    main()
