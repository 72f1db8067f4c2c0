"""The fault table: damage of every kind between a board and the recorder, and what came of it.

    PYTHONPATH=tests python -m long_runs.fault_table --seed 1 --bytes 1e9 --log faults.log

Each row is a board process behind a proxy and a recorder process; rows that are in the log already
are not run again. Ends with 1 if a sample was wrong, an undamaged frame lost, a gap not exact, or
the recorder's memory grew beyond its limit.
"""

import argparse
import json
import sys
import tempfile
from pathlib import Path

import numpy as np
from long_runs.processes import record_from
from long_runs.recording_check import check_recording

__all__ = ["MEMORY_MB", "ROWS", "fault_rows", "run_row"]

MEMORY_MB = 120.0
"""Limit of the recorder's peak memory, its queue of 32 MB included, however long it runs."""

_RATES = (1e-6, 1e-5, 1e-4, 1e-3, 1e-2)
_BY_RATE = ("flips", "drops", "inserts", "duplicated blocks", "reordered blocks")
_EVENTS = (("stalls", 1e-6), ("stalls", 1e-5), ("resets", 1e-6), ("resets", 1e-5))
_UNPLUGGED = (("unpluggings", 1e-6, "pty"), ("unpluggings", 1e-6, "socket"))

ROWS = [
    *((kind, rate, "pty") for kind in _BY_RATE for rate in _RATES),
    *((kind, rate, "pty") for kind, rate in _EVENTS),
    *_UNPLUGGED,
    *(("all kinds", rate, "pty") for rate in _RATES[1:4]),
    ("all kinds", 1e-4, "socket"),
]
_SHARES = [4 if row[0] == "all kinds" else 1 for row in ROWS]
_COLUMNS = ("fault", "per byte", "link", "MB", "faults", "frames", "undamaged", "kept", "lost")
_COLUMNS += ("wrong", "gaps", "inexact", "peak MB", "read back", "MB/s")


def fault_rows(total_bytes):
    """Return the rows with the bytes of each; the mixed ones are the longest."""
    return [
        (*row, int(total_bytes * share / sum(_SHARES)))
        for row, share in zip(ROWS, _SHARES, strict=True)
    ]


def run_row(kind, rate, link, size, seed, folder):
    """Run one row in a folder and return what was found as a dict."""
    order = {"kind": kind, "rate": rate, "link": link, "bytes": size, "seed": seed}
    order |= {"truth": f"{folder}/truth.npz"}
    sent, recorded = record_from("faulty_board", order, folder)
    (file,) = recorded["files"]
    with np.load(order["truth"]) as truth:
        verdict = check_recording(file, truth["frames"])
    row = {"kind": kind, "rate": rate, "link": link, "size": size, "seed": seed}
    row |= sent | recorded | vars(verdict)
    row["sound"] = verdict.is_sound and recorded["read_back_mb"] <= MEMORY_MB
    return row


def _line(row):
    return (
        f"{row['kind']:18}{row['rate']:9.0e}{row['link']:>7}{row['bytes'] / 1e6:8.1f}"
        f"{row['faults']:8}{row['frames']:9}{row['undamaged']:10}{row['kept']:9}{row['lost']:5}"
        f"{row['wrong']:6}{row['gaps']:7}{row['gaps_wrong']:8}{row['peak_mb']:8.0f}{row['read_back_mb']:10.0f}"
        f"{row['bytes'] / 1e6 / row['wall_s']:6.1f}"
    )


def _known(path):
    if path is None or not path.exists():
        return {}
    rows = [json.loads(line) for line in path.read_text(encoding="utf-8").splitlines()]
    return {
        _key(row["kind"], row["rate"], row["link"], row["size"], row["seed"]): row for row in rows
    }


def _key(*parts):
    return json.dumps(parts)


def main():
    parser = argparse.ArgumentParser(description="Run the fault table.")
    parser.add_argument("--seed", type=int, default=1)
    parser.add_argument("--bytes", type=float, default=1e9, help="in all rows together")
    parser.add_argument("--log", type=Path, help="rows done; run again to go on")
    parser.add_argument("--only", help="only this kind of fault")
    options = parser.parse_args()
    known, rows = _known(options.log), []
    widths = (18, 9, 7, 8, 8, 9, 10, 9, 5, 6, 7, 8, 8, 10, 6)
    titles = zip(_COLUMNS, widths, strict=True)
    print("".join(f"{t:{'<' if t == 'fault' else '>'}{w}}" for t, w in titles))
    for kind, rate, link, size in fault_rows(options.bytes):
        if options.only not in (None, kind):
            continue
        row = known.get(_key(kind, rate, link, size, options.seed))
        if row is None:
            with tempfile.TemporaryDirectory() as folder:
                row = run_row(kind, rate, link, size, options.seed, folder)
            if options.log is not None:
                with options.log.open("a", encoding="utf-8") as log:
                    log.write(json.dumps(row) + "\n")
        rows.append(row)
        print(_line(row), flush=True)
    total = sum(row["bytes"] for row in rows)
    bad = [row for row in rows if not row["sound"]]
    print(
        f"{total:.3g} bytes, seed {options.seed}: {len(rows) - len(bad)} of {len(rows)} rows sound"
    )
    sys.exit(1 if bad else 0)


if __name__ == "__main__":
    main()
