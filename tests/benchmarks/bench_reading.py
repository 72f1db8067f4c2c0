"""How fast recordings are read and exported; run: python tests/benchmarks/bench_reading.py."""

import tempfile
import time
from pathlib import Path

import numpy as np

from firmware_bridge import open_recording
from firmware_bridge.export import export_recording

ROWS = 1_000_000


def timed(what, action, size):
    start = time.perf_counter()
    result = action()
    took = time.perf_counter() - start
    print(
        f"{what:<46} {took:6.2f} s  {size / took / 1e6:6.1f} MB/s  {ROWS / took / 1e6:5.2f} M rows/s"
    )
    return result


def damaged(text):
    lines = text.split("\n")
    for k in range(500, len(lines), 1000):
        lines[k] = lines[k][:11] + "#"
    return "\n".join(lines)


def main():
    rng = np.random.default_rng(1)
    stamps = np.arange(ROWS) / 4096
    columns = (stamps, *rng.normal(size=(2, ROWS)))
    text = "t [s],pd [V],drive [V]\n" + "".join(
        f"{t:.6f},{a:.6e},{b:.5f}\n" for t, a, b in zip(*columns, strict=True)
    )
    kept = "\n".join(line for k, line in enumerate(text.split("\n")) if k % 1000)
    with tempfile.TemporaryDirectory() as folder:
        path = Path(folder, "x.csv")
        for what, content in (
            ("CSV, 3 columns", text),
            ("CSV, semicolons and decimal commas", text.replace(",", ";").replace(".", ",")),
            ("CSV, every 1000th line damaged", damaged(text)),
            ("CSV, every 1000th line missing", "t [s],pd [V],drive [V]\n" + kept),
        ):
            path.write_text(content)
            recording = timed(what, lambda: open_recording(path), len(content))
            timed("  one trace of it", lambda r=recording: r.trace("2"), 8 * ROWS)
        for suffix in ("csv", "npz", "h5"):
            target = Path(folder, f"y.{suffix}")
            timed(
                f"export to {suffix}",
                lambda t=target, r=recording: export_recording(r, t),
                24 * ROWS,
            )
            timed("  and read again", lambda t=target: open_recording(t), target.stat().st_size)


if __name__ == "__main__":
    main()
