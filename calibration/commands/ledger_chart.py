"""``midfringe ledger chart``: control limits, alarms, drift and Allan deviation of lines."""

import click

from calibration.desk.judging_options import Judging, judging_options
from calibration.desk.ledger_options import ledger_options, moment, since_options, tell
from metro.options import ValueType, command, distrust, output_options

__all__ = ["chart"]


@command(
    example="midfringe ledger chart --ledger bench.ledger --line 87.1Hz --plot chart.png",
    short_help="control limits, alarms, drift, Allan deviation of lines",
)
@click.option(
    "--line",
    "lines_hz",
    multiple=True,
    type=ValueType("Hz", above=0.0),
    metavar="F",
    help="Which line, such as 87.1Hz; repeatable. Default: all.",
)
@click.option(
    "--sample",
    type=click.IntRange(min=1),
    default=1,
    metavar="N",
    help="Results a point of the control chart; 1: individual ones.",
)
@click.option(
    "--baseline",
    type=click.IntRange(min=8),
    default=100,
    metavar="N",
    help="Results, the first ones, that the control limits come from: 100.",
)
@click.option("--whole", is_flag=True, help="From the first result on, not the calibration's time.")
@since_options
@judging_options
@ledger_options
@output_options("plot", "json", "overwrite")
def chart(
    lines_hz: tuple[float, ...],
    sample: int,
    baseline: int,
    whole: bool,
    since: str | None,
    until: str | None,
    judging: Judging,
    ledger: str,
    bench_name: str | None,
    plot: str | None,
    as_json: bool,
    overwrite: bool,
) -> None:
    """Chart line results: control limits, alarms, drift, and for how long averaging helps.

    Results count from the calibration in force on. Alarms come from cumulative sums of the results,
    corrected for temperature; run rules only inform. The exit code is 1 where there is an alarm.
    """
    from calibration.desk.chart_plot import chart_figure
    from calibration.desk.ledger import Ledger
    from calibration.desk.ledger_charts import charts_of, start_of
    from calibration.desk.ledger_texts import chart_text
    from metro.figure_file import check_figure, save_figure
    from metro.output import to_json

    if plot is not None:
        check_figure(plot, overwrite, [ledger])
    first, last = moment(since, "--since"), moment(until, "--until")
    with Ledger(ledger, create=False) as kept:
        bench = kept.the_bench(bench_name)
        charts, entries = charts_of(
            kept,
            bench,
            lines_hz=lines_hz,
            since=start_of(kept, bench, first, whole=whole),
            until=last,
            law=judging.law,
            rule=judging.rule,
            sample=sample,
            baseline=baseline,
        )
    alarms = [alarm for found in charts for alarm in found.alarms]
    if plot is not None:
        save_figure(chart_figure(charts), plot, overwrite=overwrite)
    if as_json:
        click.echo(to_json({"entries": entries, "alarms": alarms, "charts": charts}))
    else:
        click.echo("\n\n".join(chart_text(found) for found in charts))
    tell(list(dict.fromkeys(caution for found in charts for caution in found.cautions)))
    if alarms:
        distrust([str(alarm) for alarm in alarms])
