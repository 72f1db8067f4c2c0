"""``midfringe watch``: the live page in a browser."""

import os
from pathlib import Path
from typing import TYPE_CHECKING

import click

from metro.options import ValueType, bench_options, command, is_quiet, output_options

if TYPE_CHECKING:
    from firmware_bridge.trace import Recording
    from metro.bench import Bench

__all__ = ["watch"]

_NUMBER = 8642

# The fits share two cores with the port's process and the browser: a linear-algebra library that
# takes all of them for a small product, and waits, costs four times as much. Before numpy is loaded.
os.environ.setdefault("OPENBLAS_NUM_THREADS", "1")


@command(example="midfringe watch --simulate")
@click.argument("port", required=False)
@click.option("--simulate", is_flag=True, help="A simulated board instead of a port.")
@click.option("--seed", type=int, default=1, metavar="N", help="With --simulate: of its truth.")
@click.option("--replay", metavar="FILE", help="A recording instead of a port.")
@click.option(
    "--speed",
    type=click.FloatRange(min=0.0, min_open=True),
    metavar="X",
    help="With --replay: times its own pace. Default: 1.",
)
@click.option("--baud", type=click.IntRange(min=1), default=115200, metavar="N", help="115200.")
@click.option("--text", is_flag=True, help="The board prints lines of numbers.")
@click.option(
    "--calibration", "calibration_file", metavar="FILE", help="For the fringe: from calibrate."
)
@click.option(
    "--line",
    "lines_hz",
    multiple=True,
    type=ValueType("Hz", above=0.0),
    metavar="F",
    help="A line to follow; repeatable. Default: those of the bench.",
)
@click.option(
    "--slope",
    type=click.Choice(["rising", "falling"]),
    default="rising",
    show_default=True,
    help="The side of the fringe; one photodiode cannot tell.",
)
@click.option(
    "--channel", metavar="NAME", help="The photodiode. Default: photodiode, else the first."
)
@click.option("--drive", metavar="NAME", help="The drive. Default: the bench's, else drive.")
@click.option(
    "--block",
    "block_s",
    type=ValueType("s", above=0.0),
    default="4s",
    metavar="T",
    help="Length of each line fit. Default: 4s.",
)
@click.option("--folder", default=".", metavar="DIR", help="Where recordings go. Default: here.")
@click.option(
    "--host",
    default="127.0.0.1",
    metavar="ADDRESS",
    help="Serve beyond this computer: with a token, not encrypted.",
)
@click.option(
    "--port-number",
    type=click.IntRange(0, 65535),
    default=_NUMBER,
    metavar="N",
    help=f"Of the page's address, 0 for a free one. Default: {_NUMBER}.",
)
@click.option(
    "--token", metavar="TEXT", help="Ask for this token. Default beyond 127.0.0.1: a random one."
)
@bench_options
@output_options()
def watch(
    port: str | None,
    simulate: bool,
    seed: int,
    replay: str | None,
    speed: float | None,
    baud: int,
    text: bool,
    calibration_file: str | None,
    lines_hz: tuple[float, ...],
    slope: str,
    channel: str | None,
    drive: str | None,
    block_s: float,
    folder: str,
    host: str,
    port_number: int,
    token: str | None,
    bench: "Bench",
) -> None:
    """Show a serial PORT live in a browser: trace, fringe, spectrum, lines; record and drive.

    The page's address is printed as one line. Ctrl-C brings the drive to rest and ends the recording. A
    drive limit in software is no interlock.
    """
    from metro.extras import require

    for module in ("tornado", "bokeh"):
        require(module, "live", "watch")
    from calibration.desk.watch.guard import guarded
    from calibration.desk.watch.opening import Choice, opened_source
    from calibration.desk.watch.serving import serve
    from calibration.desk.watch.setup import WatchSetup
    from calibration.record import load
    from calibration.rehearsal_folder import rehearsal_bench
    from firmware_bridge.opening import open_recording
    from metro.errors import MetroError

    if sum((port is not None, simulate, replay is not None)) != 1:
        raise click.UsageError("one of PORT, --simulate and --replay is needed, and only one")
    if speed is not None and replay is None:
        raise click.UsageError("--speed goes with --replay")
    if not Path(folder).is_dir():
        raise MetroError(f"--folder must be a directory that exists, got {folder!r}")
    guard = guarded(host, token)
    recording = None if replay is None else open_recording(replay)
    setup = WatchSetup(
        title="simulated bench" if simulate else str(port or replay),
        bench=rehearsal_bench(bench)[0] if simulate else bench,
        calibration=None if calibration_file is None else load(calibration_file),
        frequencies_hz=lines_hz,
        slope=slope,
        channel=channel if recording is None else _place(recording, channel),
        drive=drive if recording is None else _place(recording, drive),
        block_s=block_s,
    )
    choice = Choice(port, simulate, seed, recording, speed or 1.0, baud, text, Path(folder))
    with opened_source(choice, setup) as (source, first):
        server = serve(
            source,
            setup,
            guard,
            port_number,
            is_replay=replay is not None,
            is_text=text,
            first=first,
            ready=click.echo,
        )
    if not is_quiet():
        has_drive = server.orders.drive.condition != "none"
        told = "ended: drive at rest, recording closed" if has_drive else "ended: recording closed"
        click.echo("ended" if replay else told, err=True)


def _place(recording: "Recording", name: str | None) -> int | None:
    """Return the position of a channel, named as for every recording."""
    return None if name is None else recording.find(name)
