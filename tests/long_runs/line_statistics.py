"""Whether the intervals of line fits cover, and how near their scatter is to the bound.

    PYTHONPATH=tests python -m long_runs.line_statistics --records 4000 --bound 10000 --seed 1 --log lines.log

Records are simulated in seeded batches that log and go on where they ended. Coverage is that of 95 %
intervals with the fit's own Student factor, of the three lines together and of each by itself; half of the
records have a clock that is off. The bounds are the inverse of Fisher's information, the fitted drift
among its parameters.
"""

import argparse
import json
import os
import sys
from concurrent.futures import ProcessPoolExecutor
from functools import cache, partial
from multiprocessing import get_context
from pathlib import Path

import numpy as np
from numpy.polynomial import legendre

from calibration.lines import fit_lines_si
from metro.kernel.student import t_quantile

__all__ = ["BATCH", "BOUNDS", "KINDS", "Tally", "bound_batch", "coverage_batch", "judged"]

RATE = 4000.0
SAMPLES = 8000
BATCH = 50

KINDS = ("white", "walk", "mains", "gaps", "neighbour", "quantised")
"""What the noise is: white; 1/f²; with mains; with 10 % gaps; another line 2 bins away; 12 bits of which
the line has 2 counts and the noise 0.5 counts rms."""

BOUNDS = ("white, known", "white, free", "walk, known", "walk, free")
"""White noise or 1/f², the frequency known or fitted."""

_COVERS = (0.935, 0.965)
_NEAR = {"white": 0.03, "walk": 0.05}
_STEP = 0.05  # of the random walk, a sample
_SIGMA = 0.1  # of the white noise
_LARGEST_OFFSET = 1e-4


class Tally(dict):
    """By quantity: number of intervals or errors, how many cover, sum and sum of squares of pulls."""

    def put(self, name, inside, pull):
        """Count one."""
        row = self.setdefault(name, [0, 0, 0.0, 0.0])
        self[name] = [row[0] + 1, row[1] + bool(inside), row[2] + pull, row[3] + pull**2]

    def add(self, other):
        """Add another tally."""
        for name, row in other.items():
            own = self.get(name, [0, 0, 0.0, 0.0])
            self[name] = [a + b for a, b in zip(own, row, strict=True)]


def _noise(kind, rng):
    white = _SIGMA * rng.standard_normal(SAMPLES)
    if kind == "walk":
        return np.cumsum(_STEP * rng.standard_normal(SAMPLES))
    if kind == "mains":
        t = np.arange(SAMPLES) / RATE
        mains = 50.0 + 0.02 * rng.standard_normal()
        for order, size in ((1, 1.0), (2, 0.1), (3, 0.3)):
            white += size * np.cos(2 * np.pi * order * mains * t + rng.uniform(0, 2 * np.pi))
    return white


def _tones(t, frequencies, phasors):
    return (phasors[:, None] * np.exp(2j * np.pi * np.outer(frequencies, t))).real.sum(axis=0)


def simulated(kind, rng):
    """Return samples, drive, frequencies, phasors of both, and the clock's offset."""
    t = np.arange(SAMPLES) / RATE
    frequencies = np.array([31.7, 87.1, 211.4]) + rng.uniform(-0.5, 0.5, 3)
    if kind == "neighbour":
        frequencies[1] = frequencies[0] + 2 * RATE / SAMPLES
    offset = rng.uniform(-_LARGEST_OFFSET, _LARGEST_OFFSET) * rng.integers(2)
    sizes = np.full(3, 2.0) if kind == "quantised" else rng.uniform(0.5, 1.0, 3)
    truth = sizes * np.exp(1j * rng.uniform(-np.pi, np.pi, 3))
    driven = 0.5 * truth * np.exp(1j * rng.uniform(-np.pi, np.pi))
    values = _tones(t, frequencies * (1 + offset), truth) + _noise(kind, rng)
    drive = _tones(t, frequencies * (1 + offset), driven) + 0.02 * rng.standard_normal(SAMPLES)
    if kind == "quantised":
        exact = _tones(t, frequencies * (1 + offset), truth) + rng.uniform(2047, 2049)
        values = np.rint(exact + 0.5 * rng.standard_normal(SAMPLES)).astype(np.int16)
    if kind == "gaps":
        while np.isfinite(values).mean() > 0.9:
            start = rng.integers(0, SAMPLES)
            values[start : start + rng.integers(1, 100)] = np.nan
    return values, drive, frequencies, truth, driven, offset


def coverage_batch(kind, seed, batch, records=BATCH):
    """Return the tally of one batch."""
    tally = Tally()
    for number in range(records):
        rng = np.random.default_rng([seed, KINDS.index(kind), batch, number])
        values, drive, frequencies, truth, driven, offset = simulated(kind, rng)
        fit = fit_lines_si(values, RATE, frequencies, drive)
        for k, line in enumerate(fit.lines):
            for which in (
                "",
                f"line {k + 1} ",
            ):  # pooled, one line that covers hides one that does not
                _judge(tally, which, line.response, truth[k])
                _judge(tally, f"{which}ratio ", line.ratio, truth[k] / driven[k])
        pull = (fit.clock_value - offset) / fit.clock_u
        tally.put("clock offset", abs(pull) < t_quantile(0.95, fit.clock_dof), pull)
    return tally


def _judge(tally, name, estimate, truth):
    factor, size = t_quantile(0.95, estimate.dof), abs(truth)
    along = (abs(estimate.phasor) - size) / estimate.along_u
    # The u of a phase is that across over the amplitude as fitted.
    across = np.angle(estimate.phasor / truth) * abs(estimate.phasor) / estimate.across_u
    tally.put(f"{name}amplitude", abs(along) < factor, along)
    tally.put(f"{name}phase", abs(across) < factor, across)


def bound_batch(kind, seed, batch, records=BATCH):
    """Return the tally of one batch: pulls are errors over the bound."""
    noise, knowledge = kind.split(", ")
    tally = Tally()
    t = np.arange(SAMPLES) / RATE
    for number in range(records):
        rng = np.random.default_rng([seed, 100 + BOUNDS.index(kind), batch, number])
        phase = rng.uniform(-np.pi, np.pi)
        values = np.cos(2 * np.pi * _LINE_HZ * t + phase) + _noise(noise, rng)
        free = knowledge == "free"
        guess = _LINE_HZ + (rng.uniform(-0.2, 0.2) if free else 0.0)
        line = fit_lines_si(values, RATE, [guess], free=free).lines[0]
        turned = line.phasor * np.exp(-1j * phase)
        bounds = _bounds(kind)
        tally.put("amplitude", True, (abs(turned) - 1) / bounds[0])
        tally.put("phase", True, np.angle(turned) / bounds[1])
        if free:
            tally.put("frequency", True, (line.frequency_hz - _LINE_HZ) / bounds[2])
    return tally


_LINE_HZ = 87.13


@cache
def _bounds(kind):
    """Return the bounds of amplitude, phase [rad] and, where fitted, frequency [Hz], drift fitted too.

    A random walk is white noise once it is differenced; its first sample says nothing.
    """
    t = np.arange(SAMPLES) / RATE
    wave = np.exp(2j * np.pi * _LINE_HZ * t)
    drift = legendre.legvander(2 * t / t[-1] - 1, 4)
    columns = [wave.real, -wave.imag]
    if kind.endswith("free"):
        columns.append(-2 * np.pi * t * wave.imag)
    sigma = _SIGMA
    table = np.column_stack([*columns, drift])
    if kind.startswith("walk"):
        table, sigma = np.diff(table, axis=0)[:, :-5], _STEP
        table = np.column_stack([table, np.diff(drift, axis=0)[:, 1:]])
    inverse = np.linalg.inv(table.T @ table)
    return sigma * np.sqrt(np.diag(inverse)[: len(columns)])


def judged(kind, tally):
    """Return rows of the table: quantity, number, what was found, and whether it is as asked."""
    rows = []
    for name, (number, inside, total, squares) in tally.items():
        spread = float(np.sqrt(squares / number))
        if kind in KINDS:
            share = inside / number
            is_so = _COVERS[0] <= share <= _COVERS[1]
            rows.append((name, number, f"{100 * share:.2f} %", total / number, spread, is_so))
        else:
            is_so = abs(spread - 1) <= _NEAR[kind.split(",")[0]]
            rows.append((name, number, "", total / number, spread, is_so))
    return rows


def _done(path, seed):
    if path is None or not path.exists():
        return {}
    rows = [json.loads(line) for line in path.read_text(encoding="utf-8").splitlines()]
    return {(r["kind"], r["batch"]): r["tally"] for r in rows if r["seed"] == seed}


def _run(seed, task):
    kind, batch = task
    make = coverage_batch if kind in KINDS else bound_batch
    return kind, batch, make(kind, seed, batch)


def _collected(arguments):
    """Return the tally of each kind, those of the log included."""
    wanted = [(k, b) for k in KINDS for b in range(-(-arguments.records // BATCH))]
    wanted += [(k, b) for k in BOUNDS for b in range(-(-arguments.bound // BATCH))]
    done = _done(arguments.log, arguments.seed)
    tallies = {}
    for task in wanted:
        tallies.setdefault(task[0], Tally()).add(done.get(task, {}))
    os.environ["OPENBLAS_NUM_THREADS"] = "1"  # for the processes: each has a core
    with ProcessPoolExecutor(arguments.processes, mp_context=get_context("spawn")) as pool:
        left = [task for task in wanted if task not in done]
        for kind, batch, tally in pool.map(partial(_run, arguments.seed), left):
            tallies[kind].add(tally)
            if arguments.log is not None:
                row = {"seed": arguments.seed, "kind": kind, "batch": batch, "tally": tally}
                with arguments.log.open("a", encoding="utf-8") as log:
                    log.write(json.dumps(row) + "\n")
    return tallies


def main():
    """Run what is not in the log yet and print the table; 1 where something is not as asked."""
    parser = argparse.ArgumentParser(description=__doc__.splitlines()[0])
    parser.add_argument("--records", type=int, default=4000, help="of each kind of noise")
    parser.add_argument("--bound", type=int, default=10_000, help="records of each bound")
    parser.add_argument("--seed", type=int, default=1)
    parser.add_argument("--log", type=Path)
    parser.add_argument("--processes", type=int, default=2)
    tallies = _collected(parser.parse_args())
    print(f"{'noise':14s} {'quantity':22s} {'number':>7s} {'inside':>8s}   mean  spread")
    missed = 0
    for kind, tally in tallies.items():
        for name, number, share, mean, spread, is_so in judged(kind, tally):
            missed += not is_so
            word = "" if is_so else "  NOT AS ASKED"
            print(f"{kind:14s} {name:22s} {number:7d} {share:>8s} {mean:+6.3f} {spread:7.3f}{word}")
    return 1 if missed else 0


if __name__ == "__main__":
    sys.exit(main())
