"""Start-up of ``midfringe expect``, as a whole process, against its parts.

Run on request: ``python tests/benchmarks/bench_start_up.py``. Prints the best of several runs, and
the ratio to importing numpy and pint and building pint's own registry.
"""

import subprocess
import sys
import time

RUNS = 11
EXPECT = [
    "-m",
    "metro",
    "expect",
    "--strain",
    "1e-21",
    "--arm",
    "4km",
    "--wavelength",
    "1064nm",
    "--json",
]
BASE = "import numpy, pint; pint.UnitRegistry()"
PARTS = {
    "python alone": ["-c", "pass"],
    "import click": ["-c", "import click"],
    "import numpy": ["-c", "import numpy"],
    "import pint": ["-c", "import pint"],
    "the program's own registry": ["-c", "from metro.units import registry; registry()"],
    "numpy, pint and its registry": ["-c", BASE],
    "midfringe expect": EXPECT,
}


def seconds(arguments):
    start = time.perf_counter()
    subprocess.run([sys.executable, *arguments], check=True, capture_output=True)
    return time.perf_counter() - start


def main():
    best = dict.fromkeys(PARTS, float("inf"))
    for _ in range(RUNS):  # interleaved, so that a busy machine is fair to all
        for name, arguments in PARTS.items():
            best[name] = min(best[name], seconds(arguments))
    for name, time_s in best.items():
        print(f"{name:30} {1e3 * time_s:6.0f} ms")
    ratio = best["midfringe expect"] / best["numpy, pint and its registry"]
    print(f"{'ratio of the last two':30} {ratio:6.2f}")


if __name__ == "__main__":
    main()
