"""``midfringe ledger add``: calibrations and line results into the ledger."""

from typing import Any

import click

from calibration.desk.ledger_options import ledger_options, tell
from calibration.desk.sourcing_options import Sourcing, sourcing_options
from metro.options import command, is_quiet, output_options

__all__ = ["EXAMPLE", "add"]

EXAMPLE = "midfringe ledger add rehearsal/calibration.json --ledger bench.ledger"


@command(example=EXAMPLE, short_help="calibrations and line results into the ledger")
@click.argument("files", nargs=-1, metavar="[CALIBRATION]...")
@click.option(
    "--lines",
    "lines_files",
    multiple=True,
    metavar="FILE",
    help="Line results ('midfringe lines --json'; - from a pipe), or a recording; repeatable.",
)
@sourcing_options
@ledger_options
@output_options("json")
def add(
    files: tuple[str, ...],
    lines_files: tuple[str, ...],
    sourcing: Sourcing,
    ledger: str,
    bench_name: str | None,
    as_json: bool,
) -> None:
    """Add calibrations and line results; a file that is there already is not taken twice.

    The ledger is made where there is none. Times are UTC. A recording's lines are measured in metres
    per volt, by the fringe of the calibration in force.
    """
    from calibration.desk.calibration_entry import CalibrationEntry
    from calibration.desk.ledger import Ledger, calibrations_if_any
    from firmware_bridge.gap_reason import counted
    from metro.output import to_json

    if not files and not lines_files:
        raise click.UsageError("nothing to add: name a calibration, or give --lines FILE")
    bench = bench_name or "bench"
    calibrations = [CalibrationEntry.of_file(path, bench) for path in files]
    known = sorted([*calibrations_if_any(ledger, bench), *calibrations], key=lambda c: c.created)
    in_force = known[-1].calibration if known else None
    results = [sourcing.entries(path, in_force, bench) for path in lines_files]
    with Ledger(ledger) as kept:
        added = [entry for entry in calibrations if kept.add_calibration(entry)]
        new = [group for group in results if kept.add_line_results(group)]
    entries: list[Any] = [*added, *(entry for group in new for entry in group)]
    held = len(calibrations) + len(results) - len(added) - len(new)
    if as_json:
        click.echo(to_json({"entries": entries, "alarms": [], "already_held": held}))
    else:
        lines_added = counted(sum(map(len, new)), "line result")
        click.echo(f"{counted(len(added), 'calibration')} and {lines_added} added")
    tell(list(dict.fromkeys(c for group in results for entry in group for c in entry.cautions)))
    if held and not is_quiet():
        click.echo(f"{counted(held, 'file')} already in the ledger", err=True)
