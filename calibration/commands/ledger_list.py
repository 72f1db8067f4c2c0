"""``midfringe ledger list``: what the ledger holds, in the order of time."""

from typing import Any

import click

from calibration.desk.judging_options import Judging, judging_options
from calibration.desk.ledger_options import ledger_options, moment, since_options, tell
from metro.options import command, output_options

__all__ = ["list_entries"]


@command(
    example="midfringe ledger list --ledger bench.ledger --since 2026-03-01",
    short_help="what the ledger holds, in the order of time",
)
@since_options
@judging_options
@ledger_options
@output_options("json")
def list_entries(
    since: str | None,
    until: str | None,
    judging: Judging,
    ledger: str,
    bench_name: str | None,
    as_json: bool,
) -> None:
    """List calibrations and line results in the order of time."""
    from calibration.desk.ledger import Ledger
    from calibration.desk.ledger_charts import alarms_of
    from calibration.desk.ledger_texts import entry_row
    from metro.output import table, to_json

    first, last = moment(since, "--since"), moment(until, "--until")
    with Ledger(ledger, create=False) as kept:
        calibrations = kept.calibrations(bench=bench_name, since=first, until=last)
        results = kept.line_results(bench=bench_name, since=first, until=last)
        benches = kept.benches() if bench_name is None else [bench_name]
        alarms = [
            alarm
            for bench in benches
            for alarm in alarms_of(kept, bench, judging.law, judging.rule)
        ]
    listed: list[Any] = sorted(
        [*((entry.created, entry) for entry in calibrations), *((e.time, e) for e in results)],
        key=lambda pair: pair[0],
    )
    if as_json:
        click.echo(to_json({"entries": [entry for _, entry in listed], "alarms": alarms}))
        return
    rows = [entry_row(entry) for _, entry in listed]
    click.echo(table(rows, ["time (UTC)", "bench", "what", "value", "trust"]) if rows else "empty")
    tell([str(alarm) for alarm in alarms])
