"""``python -m firmware_bridge.simulated``: a simulated board at a port, in real time, to try things on.

It stands until Ctrl-C. Lines are set by whoever opens the port (``record --line``, the live page).
"""

import sys
import time
from importlib.resources import as_file, files
from math import inf

import click

from firmware_bridge.errors import BridgeError
from metro.errors import MetroError
from metro.value_type import ValueType

__all__ = ["main"]


@click.command(context_settings={"help_option_names": ["-h", "--help"]})
@click.option("--bench", "bench_file", metavar="FILE", help="The bench behind it; else a built-in.")
@click.option("--seed", type=click.IntRange(min=0), default=1, help="Of its truth and noise: 1.")
@click.option(
    "--slope", type=click.Choice(["rising", "falling"]), default="rising", show_default=True
)
@click.option(
    "--beam",
    type=click.Choice(["both", "x", "y", "blocked"]),
    default="both",
    help="Which beams reach the photodiode.",
)
@click.option(
    "--triangle",
    type=ValueType("V", above=0.0),
    metavar="V",
    help="Scan: amplitude of a triangle of 4 s at the actuator's terminals, such as 20V.",
)
def main(bench_file: str | None, seed: int, slope: str, beam: str, triangle: float | None) -> None:
    """Run a simulated board in real time and print its port; Ctrl-C ends it."""
    from firmware_bridge.simulated.bench import SimulatedBench
    from firmware_bridge.simulated.board import SimulatedBoard
    from firmware_bridge.simulated.setup import Setup, Triangle
    from metro.bench import load_bench

    with as_file(files("firmware_bridge.simulated").joinpath("bench.toml")) as built_in:
        bench = load_bench(bench_file or built_in)
    scan = None if triangle is None else Triangle(triangle, 4.0)
    setup = Setup(inf, beam=beam, slope=None if scan else slope, scan=scan)
    with SimulatedBoard(SimulatedBench(bench, seed), setup, speed=1.0) as board:
        click.echo(board.port)
        sys.stdout.flush()
        while True:
            time.sleep(3600.0)


def _run() -> int:
    try:
        main(standalone_mode=False)
    except click.ClickException as error:
        click.echo(f"simulated board: {' '.join(error.format_message().split())}", err=True)
        return 2
    except (MetroError, BridgeError) as error:
        click.echo(f"simulated board: {error}", err=True)
        return 2
    except (KeyboardInterrupt, click.Abort):
        return 0
    return 0


if __name__ == "__main__":
    sys.exit(_run())
