"""How fast lines are fitted, side by side with general libraries on the same data.

Run with both cores and the library's own choice of kernels::

    env -u OPENBLAS_CORETYPE -u OPENBLAS_L2_SIZE python tests/benchmarks/bench_lines.py [samples]

Rates are per sample: curve_fit and lstsq on the first 10⁶ samples, numpy.sum, the product alone and the
complete fit on all (3·10⁷ unless given). Then the complete fit of the first thousandth, hundredth, tenth
and of all: over these three decades the time a sample must not rise.
"""

import os
import resource
import sys
import time
from itertools import pairwise

import numpy as np
from numpy.polynomial import legendre

from calibration.lines import fit_lines_si
from calibration.phasors import block_phasors

RATE = 4000.0
LINES = np.array([31.7, 47.3, 87.1, 123.4, 211.3, 307.9, 401.1, 503.7])
FIRST = 1_000_000
DECADES = (1000, 100, 10, 1)  # parts of the record whose times are compared
FLAT = 1.25  # a sample of a longer record may take as much as one of a shorter, and a quarter for the noise


def _record(samples):
    rng = np.random.default_rng(1)
    values = rng.standard_normal(samples)
    step = 1 << 20
    for start in range(0, samples, step):
        t = np.arange(start, min(start + step, samples)) / RATE
        values[start : start + step] += np.cos(2 * np.pi * np.outer(LINES, t)).sum(axis=0)
    return values


def _rate(samples, run, repeats):
    """Return the best rate of several runs [samples/s]: what else the machine does only slows."""
    best = float("inf")
    for _ in range(repeats):
        begin = time.perf_counter()
        run()
        best = min(best, time.perf_counter() - begin)
    return samples / best


def _curve_fit(values, t):
    from scipy.optimize import curve_fit

    def model(t, *p):
        total = np.full(len(t), p[-1])
        for k, f in enumerate(LINES):
            total += p[2 * k] * np.cos(2 * np.pi * f * t) + p[2 * k + 1] * np.sin(2 * np.pi * f * t)
        return total

    return curve_fit(model, t, values, p0=[0.5] * (2 * len(LINES) + 1))[0]


def _table(t):
    waves = np.exp(2j * np.pi * np.outer(t, LINES))
    drift = legendre.legvander(2 * t / t[-1] - 1, 2)
    return np.hstack([waves.real, waves.imag, drift])


def _print_decades(values):
    """Print the time a sample over three decades of length, and whether it keeps from rising."""
    lengths = [len(values) // part for part in DECADES]
    times_ns = [
        1e9 / _rate(n, lambda: fit_lines_si(values[:n], RATE, LINES), 7)  # noqa: B023  # at once
        for n in lengths
    ]
    for n, time_ns in zip(lengths, times_ns, strict=True):
        print(f"line fit of {n:11,d} samples {time_ns:10.3f} ns a sample")
    flat = all(after <= FLAT * before for before, after in pairwise(times_ns))
    print(f"cost at most linear over three decades: {'yes' if flat else 'NO'}")


def main():
    samples = int(float(sys.argv[1])) if len(sys.argv) > 1 else 30_000_000
    values = _record(samples)
    t = np.arange(FIRST) / RATE
    table = _table(t)
    head = values[:FIRST].copy()
    rates = {
        "scipy.optimize.curve_fit": _rate(FIRST, lambda: _curve_fit(head, t), 1),
        "numpy.linalg.lstsq, table ready": _rate(
            FIRST, lambda: np.linalg.lstsq(table, head, rcond=None), 2
        ),
        "numpy.sum": _rate(samples, values.sum, 7),
        "block phasors": _rate(samples, lambda: block_phasors(values, LINES / RATE), 7),
        "complete line fit": _rate(samples, lambda: fit_lines_si(values, RATE, LINES), 7),
    }
    for name, rate in rates.items():
        print(f"{name:34s} {rate / 1e6:10.3f} million samples/s")
    ours, total = rates["complete line fit"], rates["numpy.sum"]
    print(f"line fit / curve_fit      {ours / rates['scipy.optimize.curve_fit']:8.0f}")
    print(f"line fit / lstsq          {ours / rates['numpy.linalg.lstsq, table ready']:8.1f}")
    print(f"block phasors / numpy.sum {rates['block phasors'] / total:8.3f}")
    print(f"line fit / numpy.sum      {ours / total:8.3f}")
    _print_decades(values)
    names = ("OPENBLAS_NUM_THREADS", "OMP_NUM_THREADS", "OPENBLAS_CORETYPE")
    threads = ", ".join(f"{name}={os.environ.get(name, 'not set')}" for name in names)
    peak = resource.getrusage(resource.RUSAGE_SELF).ru_maxrss / 1e6
    print(f"cores {os.cpu_count()}; load {os.getloadavg()[0]:.1f}; {threads}; peak {peak:.2f} GB")


if __name__ == "__main__":
    main()
