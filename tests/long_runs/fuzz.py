"""Fuzzing in seeded batches that log and go on where they ended.

    PYTHONPATH=tests python -m long_runs.fuzz decoder --inputs 10000000 --seed 1 --log fuzz.log

Batch k of a seed has always the same inputs. An input that raises what its reader does not name, or
takes longer than a minute, is kept in ``tests/long_runs/found``, whose files are tests from then on.
"""

import argparse
import hashlib
import json
import random
import signal
import sys
import time
import traceback
import warnings
from pathlib import Path

from long_runs.fuzz_targets import TARGETS

__all__ = ["FOUND", "HangError", "run_batch", "run_one"]

FOUND = Path(__file__).with_name("found")
"""Inputs that failed once, one folder a target."""

_HANG_S = 60.0


class HangError(Exception):
    """An input that took too long."""


def run_one(target, data):
    """Give one input to a target; raise what it raises, or `HangError`."""
    signal.setitimer(signal.ITIMER_REAL, _HANG_S)
    try:
        target.run(data)
    finally:
        signal.setitimer(signal.ITIMER_REAL, 0.0)


def _hang(number, frame):
    raise HangError(f"no end within {_HANG_S:g} s")


def run_batch(name, target, seed, batch, inputs, found=FOUND):
    """Run a batch; return how many inputs failed. Those are kept below ``found``."""
    rng = random.Random(f"{name} {seed} {batch}")  # noqa: S311  # seeded inputs, not secrets
    before = signal.signal(signal.SIGALRM, _hang)
    failures = 0
    try:
        with warnings.catch_warnings():
            warnings.simplefilter("error")
            for number in range(inputs):
                data = target.make(rng)
                try:
                    run_one(target, data)
                except Exception as error:  # noqa: BLE001  # whatever comes is a finding
                    failures += 1
                    where = _keep(found / name, data)
                    print(f"{name}, seed {seed}, batch {batch}, input {number}: {error!r}, {where}")
                    print("".join(traceback.format_tb(error.__traceback__)[-3:]), flush=True)
    finally:
        signal.signal(signal.SIGALRM, before)
    return failures


def _keep(folder, data):
    folder.mkdir(parents=True, exist_ok=True)
    path = folder / hashlib.sha256(data).hexdigest()[:16]
    path.write_bytes(data)
    return path


def _done(path, name, seed):
    if path is None or not path.exists():
        return {}
    rows = [json.loads(line) for line in path.read_text(encoding="utf-8").splitlines()]
    return {r["batch"]: r for r in rows if (r["target"], r["seed"]) == (name, seed)}


def main():
    parser = argparse.ArgumentParser(description="Fuzz one reader.")
    parser.add_argument("target", choices=TARGETS)
    parser.add_argument("--inputs", type=float, required=True, help="in all, earlier ones included")
    parser.add_argument("--seed", type=int, default=1)
    parser.add_argument("--log", type=Path, help="batches done; run again to go on")
    options = parser.parse_args()
    name, target = options.target, TARGETS[options.target]()
    done = _done(options.log, name, options.seed)
    inputs = failures = batch = 0
    while inputs < options.inputs:
        row = done.get(batch)
        if row is None:
            begun_s = time.monotonic()
            failed = run_batch(name, target, options.seed, batch, target.batch)
            row = {"target": name, "seed": options.seed, "batch": batch, "inputs": target.batch}
            row |= {"failures": failed, "seconds": round(time.monotonic() - begun_s, 2)}
            if options.log is not None:
                with options.log.open("a", encoding="utf-8") as log:
                    log.write(json.dumps(row) + "\n")
        inputs, failures, batch = inputs + row["inputs"], failures + row["failures"], batch + 1
    print(f"{name}: {inputs} inputs, seed {options.seed}, {failures} failures")
    sys.exit(1 if failures else 0)


if __name__ == "__main__":
    main()
