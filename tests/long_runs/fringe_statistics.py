"""Statistics of the driven fringe: do its 95 % intervals hold 95 times in 100, is a minimum ever wrong?

    PYTHONPATH=tests python -m long_runs.fringe_statistics --records 2000 --seed 1 --log fringe.log

Each record has 20 000 samples, 20 dB, a contrast of 0.2 to 1 and a rate of at least 2.5·(m + 5) samples
a period. Records that are in the log already are not fitted again. Ends with 1 if a limit is missed.
"""

import argparse
import json
import math
import sys
from concurrent.futures import ProcessPoolExecutor, as_completed
from pathlib import Path

import numpy as np

from calibration.driven_fringe import fit_driven_fringe_si
from metro.kernel.student import t_quantile

__all__ = ["KINDS", "fitted", "made", "rows_of", "verdict"]

RATE_HZ = 1000.0
SAMPLES = 20_000
KINDS = ("deep", "given", "drift", "exact", "undetermined")
"""1 to 320 rad alone; below 1 rad with extremes given with u; below 1 rad with π of drift and more;
1 to 320 rad without noise; below 0.8 rad with neither."""
_SHARE = {"exact": 0.1, "undetermined": 0.1}  # of the records of the others
_WRONG = 6.0  # a wrong minimum lies further off than this many standard uncertainties
_LIMITS = (0.935, 0.965)


def made(kind, seed, samples=SAMPLES):
    """Return a record, its line, what is given of it, and the truth (depth, low, high)."""
    rng = np.random.default_rng([seed, samples])
    deep = kind in ("deep", "exact")
    depth = np.exp(rng.uniform(0, np.log(320)) if deep else rng.uniform(np.log(0.02), 0))
    if kind == "undetermined":
        depth *= 0.8  # nearer to 1 rad the record may not exclude that it is deep enough
    if samples < SAMPLES:  # short records: neither the deepest nor the smallest
        depth = min(depth, 40.0) if deep else max(depth, 0.1)
    f = RATE_HZ / (2.5 * (depth + 5)) * rng.uniform(0.5, 1.0)
    half = rng.uniform(0.5, 2.0)
    middle = half / rng.uniform(0.2, 1.0)
    t = np.arange(samples) / RATE_HZ
    near = kind in ("given", "undetermined")
    working = rng.uniform(0.5, np.pi - 0.5) if near else rng.uniform(-np.pi, np.pi)
    phase = working + depth * np.cos(2 * np.pi * f * t + rng.uniform(0, 6))
    if kind == "drift":
        phase += rng.choice([-1, 1]) * rng.uniform(3.3, 6) * t / t[-1]
    noise = 0.0 if kind == "exact" else half / np.sqrt(200)
    volts = middle + half * np.cos(phase) + noise * rng.normal(size=samples)
    given = {}
    if kind == "given":
        u = 0.01 * half
        low, high = np.array([middle - half, middle + half]) + u * rng.normal(size=2)
        given = {"low": low, "high": high, "low_u": u, "high_u": u}
    return volts, f, given, (depth, middle - half, middle + half)


def fitted(kind, seed, samples=SAMPLES):
    """Return what came of one record as a dict."""
    volts, f, given, truth = made(kind, seed, samples)
    fit = fit_driven_fringe_si(volts, RATE_HZ, [f], **given)
    got = (fit.phase_amplitude[0], fit.low, fit.high)
    values = [float(one.magnitude) for one in got]
    return {
        "kind": kind,
        "seed": seed,
        "samples": samples,
        "depth": truth[0],
        "span": truth[2] - truth[1],
        "off": [value - true for value, true in zip(values, truth, strict=True)],
        "u": [float(one.u_magnitude) for one in got],
        "factor": t_quantile(0.95, got[0].dof),
        "reasons": fit.reasons,
    }


def rows_of(records):
    """Return the table: one row a kind that has records."""
    out = []
    for kind in KINDS:
        own = [record for record in records if record["kind"] == kind]
        if not own:
            continue
        off, u = np.array([one["off"] for one in own]), np.array([one["u"] for one in own])
        span = np.array([one["span"] for one in own])
        depth = np.array([one["depth"] for one in own])
        error = off / np.maximum(u, 1e-300)
        factor = np.array([one["factor"] for one in own])
        out.append(
            {
                "kind": kind,
                "records": len(own),
                "coverage": (np.abs(error) < factor[:, None]).mean(axis=0).tolist(),
                "widths": error.std(axis=0).tolist(),
                "wrong": int(np.sum(np.abs(error[:, 0]) > _WRONG)),
                "bias": float(np.median(off[:, 0] / depth)),
                "worst": float(np.abs(off[:, 0] / depth).max()),
                "extremes": float(np.abs(np.mean(off[:, 1:] / span[:, None], axis=0)).max()),
                "extremes_u": float(np.max(np.std(off[:, 1:] / span[:, None], axis=0)))
                / math.sqrt(max(len(own) - 1, 1))
                or float(np.max(u[:, 1:] / span[:, None])),
                "distrusted": sum(bool(one["reasons"]) for one in own),
                "undetermined": sum(
                    any("depth not determined" in reason for reason in one["reasons"])
                    for one in own
                ),
            }
        )
    return out


def verdict(row):
    """Return which limits a row misses; a small number of records gets the room that chance needs."""
    missed, count = [], row["records"]
    if row["kind"] == "undetermined":
        return [] if row["undetermined"] == count else ["a depth was given without ground"]
    if row["kind"] == "exact":
        return [] if row["worst"] < 1e-5 else [f"bias {row['worst']:.1e} without noise"]
    room = 2.6 * math.sqrt(0.95 * 0.05 / count)
    low, high = (min(_LIMITS[0], 0.95 - room), max(_LIMITS[1], 0.95 + room))
    if not low <= row["coverage"][0] <= high:
        missed.append(f"coverage {row['coverage'][0]:.1%}")
    if row["wrong"]:
        missed.append(f"{row['wrong']} wrong minima")
    if row["extremes"] > 1e-3 + 3.0 * row["extremes_u"]:
        missed.append(f"extremes biased by {row['extremes']:.2%}")
    return missed


def _known(path):
    if path is None or not path.exists():
        return {}
    records = []
    for line in path.read_text(encoding="utf-8").splitlines():
        try:
            records.append(json.loads(line))
        except ValueError:
            continue  # the last line of a run that was killed
    return {(one["kind"], one["seed"], one["samples"]): one for one in records}


def _line(row):
    depth, low, high = row["coverage"]
    return (
        f"{row['kind']:13}{row['records']:8}{depth:8.1%}{low:8.1%}{high:8.1%}{row['widths'][0]:7.2f}"
        f"{row['wrong']:7}{row['bias']:11.1e}{row['worst']:10.1e}{row['extremes']:10.1e}"
        f"{row['distrusted']:12}{row['undetermined']:14}"
    )


def main():
    parser = argparse.ArgumentParser(description="Run the statistics of the driven fringe.")
    parser.add_argument("--records", type=int, default=2000, help="of each kind")
    parser.add_argument("--seed", type=int, default=1)
    parser.add_argument("--log", type=Path, help="records done; run again to go on")
    parser.add_argument("--only", choices=KINDS, help="only this kind")
    parser.add_argument("--processes", type=int, default=2)
    options = parser.parse_args()
    known = _known(options.log)
    wanted = [
        (kind, options.seed * 1_000_000 + k, SAMPLES)
        for kind in KINDS
        if options.only in (None, kind)
        for k in range(math.ceil(options.records * _SHARE.get(kind, 1.0)))
    ]
    left = [key for key in wanted if key not in known]
    log = None if options.log is None else options.log.open("a", encoding="utf-8")
    with ProcessPoolExecutor(options.processes) as pool:
        for done in as_completed([pool.submit(fitted, *key) for key in left]):
            record = done.result()
            known[record["kind"], record["seed"], record["samples"]] = record
            if log is not None:
                log.write(json.dumps(record) + "\n")
                log.flush()
    if log is not None:
        log.close()
    rows = rows_of([known[key] for key in wanted])
    print(
        "kind          records   depth     low    high  width  wrong  bias depth     worst  extremes"
        "  distrusted  undetermined"
    )
    bad = False
    for row in rows:
        print(_line(row))
        for missed in verdict(row):
            bad = True
            print(f"    missed: {missed}")
    sys.exit(1 if bad else 0)


if __name__ == "__main__":
    main()
