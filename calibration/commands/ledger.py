"""``midfringe ledger``: calibrations and line results over the years, and whether any drifted."""

from typing import TYPE_CHECKING, Any

import click

from calibration.desk.ledger_options import (
    Judging,
    Sourcing,
    judging_options,
    ledger_options,
    sourcing_options,
)
from metro.options import ValueType, command, distrust, is_quiet, output_options

if TYPE_CHECKING:
    from collections.abc import Sequence

    from calibration.desk.agreement import Agreement
    from calibration.desk.calibration_entry import CalibrationEntry
    from calibration.desk.ledger import Ledger
    from calibration.desk.line_chart import LineChart

__all__ = ["ledger"]

_EXAMPLE = "midfringe ledger add rehearsal/calibration.json --ledger bench.ledger"


class _Group(click.Group):
    """The commands of the ledger, with one example."""

    def format_epilog(
        self,
        ctx: click.Context,  # noqa: ARG002  # click's signature
        formatter: click.HelpFormatter,
    ) -> None:
        formatter.write(f"\nExample:\n  {_EXAMPLE}\n")


@click.group(
    cls=_Group,
    no_args_is_help=False,
    context_settings={"help_option_names": ["-h", "--help"], "max_content_width": 100},
)
def ledger() -> None:
    """Keep calibrations and line results; tell whether anything has drifted.

    The ledger is an SQLite file, or a PostgreSQL database for several benches.
    """


@command(example=_EXAMPLE, short_help="calibrations and line results into the ledger")
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
    from calibration.desk.ledger import Ledger
    from firmware_bridge.gap_reason import counted
    from metro.output import to_json

    if not files and not lines_files:
        raise click.UsageError("nothing to add: name a calibration, or give --lines FILE")
    bench = bench_name or "bench"
    calibrations = [CalibrationEntry.of_file(path, bench) for path in files]
    known = sorted([*_calibrations(ledger, bench), *calibrations], key=lambda c: c.created)
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
    if held and not is_quiet():
        click.echo(f"{counted(held, 'file')} already in the ledger", err=True)


def _calibrations(place: str, bench: str) -> "list[CalibrationEntry]":
    """Return the calibrations of a bench, none where there is no ledger yet."""
    from calibration.desk.ledger import Ledger
    from calibration.desk.ledger_errors import LedgerError

    try:
        with Ledger(place, create=False) as kept:
            return kept.calibrations(bench=bench)
    except LedgerError:
        return []  # whoever opens it to write says what is wrong with it


def _since_options(function: Any) -> Any:  # noqa: ANN401  # a click decorator
    for name, text in (
        ("--until", "Only before this time, ISO 8601."),
        ("--since", "Only from this time on, ISO 8601 (UTC where it does not say)."),
    ):
        function = click.option(name, metavar="TIME", help=text)(function)
    return function


@command(
    example="midfringe ledger list --ledger bench.ledger --since 2026-03-01",
    short_help="what the ledger holds, in the order of time",
)
@_since_options
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
    from metro.output import table, to_json

    first, last = _moment(since, "--since"), _moment(until, "--until")
    with Ledger(ledger, create=False) as kept:
        calibrations = kept.calibrations(bench=bench_name, since=first, until=last)
        results = kept.line_results(bench=bench_name, since=first, until=last)
        benches = kept.benches() if bench_name is None else [bench_name]
        alarms = [alarm for bench in benches for alarm in _alarms(kept, bench, judging)]
    listed: list[Any] = sorted(
        [*((entry.created, entry) for entry in calibrations), *((e.time, e) for e in results)],
        key=lambda pair: pair[0],
    )
    if as_json:
        click.echo(to_json({"entries": [entry for _, entry in listed], "alarms": alarms}))
        return
    rows = [_row(entry) for _, entry in listed]
    click.echo(table(rows, ["time (UTC)", "bench", "what", "value", "trust"]) if rows else "empty")
    _tell([str(alarm) for alarm in alarms])


def _alarms(kept: "Ledger", bench: str, judging: Judging) -> list[Any]:
    """Return the alarms since the calibration in force."""
    from calibration.desk.ledger_charts import by_line, start_of
    from calibration.desk.line_alarms import alarms_in

    entries = kept.line_results(bench=bench, since=start_of(kept, bench, None, whole=False))
    law, rule = judging.law, judging.rule
    return [alarm for group in by_line(entries) for alarm in alarms_in(group, law, rule)]


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
@_since_options
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
    from metro.figure_file import check_figure, save_figure
    from metro.output import to_json

    if plot is not None:
        check_figure(plot, overwrite, [ledger])
    first, last = _moment(since, "--since"), _moment(until, "--until")
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
        click.echo("\n\n".join(_chart_text(found) for found in charts))
    _tell(list(dict.fromkeys(caution for found in charts for caution in found.cautions)))
    if alarms:
        distrust([str(alarm) for alarm in alarms])


@command(
    example="midfringe ledger check today.mfr --slope rising --ledger bench.ledger",
    short_help="do today's lines agree with the calibration in force?",
)
@click.argument("result", required=False)
@sourcing_options
@judging_options
@ledger_options
@output_options("json")
def check(
    result: str | None,
    sourcing: Sourcing,
    judging: Judging,
    ledger: str,
    bench_name: str | None,
    as_json: bool,
) -> None:
    """Tell whether today's lines agree with the calibration in force.

    RESULT is a recording of the lines near mid-fringe, or what 'midfringe lines --json' printed;
    without it the newest results in the ledger. The exit code is 1 where a line does not agree.
    """
    from calibration.desk.agreement import agreement
    from calibration.desk.ledger import Ledger
    from calibration.desk.ledger_charts import by_line
    from calibration.desk.ledger_errors import LedgerError
    from metro.output import to_json

    law = judging.law
    if law.is_fitted:
        raise LedgerError("check needs a temperature coefficient with its value, not 'fit'")
    with Ledger(ledger, create=False) as kept:
        bench = kept.the_bench(bench_name)
        in_force = kept.in_force(bench)
        if in_force is None:
            raise LedgerError(f"the ledger {kept.name} has no calibration of {bench!r}")
        if result is None:
            groups = by_line(kept.line_results(bench=bench, since=in_force.created))
            entries = [group[-1] for group in groups]
        else:
            entries = sourcing.entries(result, in_force.calibration, bench, _now())
        if not entries:
            raise LedgerError(f"the ledger {kept.name} has no line result since the calibration")
        alarms = _alarms(kept, bench, judging)
    found = [agreement(entry, in_force.calibration, law) for entry in entries]
    reasons = list(dict.fromkeys(reason for each in found for reason in each.reasons))
    reasons += [str(alarm) for alarm in alarms]
    document = {
        "entries": entries,
        "alarms": alarms,
        "calibration": {"created": in_force.created, "sha256": in_force.sha256},
        "comparisons": found,
        "agree": all(each.is_agreed for each in found),
        "reasons": reasons,
    }
    click.echo(to_json(document) if as_json else _agreement_text(found, in_force.created))
    _tell(list(dict.fromkeys(caution for each in found for caution in each.cautions)))
    if reasons:
        distrust(reasons)


ledger.add_command(add, "add")
ledger.add_command(list_entries, "list")
ledger.add_command(chart, "chart")
ledger.add_command(check, "check")


def _moment(text: str | None, name: str) -> str | None:
    from calibration.desk.utc import parse_time

    return None if text is None else parse_time(text, name)


def _now() -> str:
    import time

    from calibration.desk.utc import iso_of

    return iso_of(time.time())


def _tell(lines: "Sequence[str]") -> None:
    if not is_quiet():
        for line in lines:
            click.echo(f"caution: {line}", err=True)


def _row(entry: Any) -> list[object]:  # noqa: ANN401  # either kind of entry
    from calibration.desk.line_entry import LineEntry

    if isinstance(entry, LineEntry):
        name = f"{'response/drive' if entry.is_ratio else 'amplitude'} at {entry.line_hz:.9g} Hz"
        moment, value, reasons = entry.time, str(entry.value), list(entry.reasons)
    else:
        name = f"calibration {entry.sha256[:12]}"
        moment, value = entry.created, f"slope {entry.calibration.readout_slope}"
        reasons = entry.calibration.all_reasons
    return [
        moment[:19].replace("T", " "),
        entry.bench,
        name,
        value,
        "; ".join(reasons) or "no reason for distrust found",
    ]


def _chart_text(chart: "LineChart") -> str:
    from metro.display import show
    from metro.output import table

    unit, limits = chart.unit, chart.limits
    rows: list[list[object]] = [
        ["line", show(chart.line_hz, "Hz", 9)],
        ["  results", f"{len(chart.values)}, mean {show(float(chart.values.mean()), unit, 6)}"],
    ]
    if chart.law.is_used:
        how = "fitted" if chart.law.is_fitted else "as given"
        rows.append(["  temperature coefficient", f"{chart.law.measured}; {how}"])
    if limits is not None:
        low, high = show(limits.low, unit, 6), show(limits.high, unit, 6)
        rows += [
            ["  control limits", f"{low} to {high} ({limits.kind}, first {limits.baseline})"],
            ["  run rules met", f"{len(chart.rules)} times (information, no alarm)"],
        ]
    rule = chart.rule
    often = f"one false in {rule.run_length:.3g} results"
    rows.append(
        [
            "  alarms",
            f"{len(chart.alarms)} (cumulative sums, k = {rule.k:g}, h = {rule.h:.4g}: {often})",
        ]
    )
    if chart.drift is not None:
        seen = "told" if chart.drift.is_significant else "not told"
        rows.append(["  drift a day", f"{_percent(chart.drift.per_day())}; {seen} from zero"])
    if chart.allan is not None:
        allan, best = chart.allan, chart.allan.best
        least = show(float(allan.deviation[best]), unit, 3)
        more = ", still falling" if allan.is_still_falling else ""
        rows.append(
            [
                "  averaging helps up to",
                f"{allan.tau_s[best]:.4g} s (Allan deviation {least}{more})",
            ]
        )
    return table(rows)


def _percent(measured: Any) -> str:  # noqa: ANN401  # Measured
    expanded = measured.coverage_factor() * float(measured.u_magnitude)
    return f"{100 * float(measured.magnitude):+.3g} %, U = {100 * expanded:.2g} % (95 %)"


def _agreement_text(found: "Sequence[Agreement]", created: str) -> str:
    from metro.output import table

    rows = [
        [
            f"{each.entry.line_hz:.9g} Hz",
            str(each.measured),
            str(each.expected),
            f"{100 * each.relative_difference:+.3g} %",
            f"{each.normalised_error:.2f}",
            "agrees" if each.is_agreed else "does not agree",
        ]
        for each in found
    ]
    header = ["line", "measured", "calibration", "difference", "difference/U", "verdict"]
    note = (
        f"calibration in force: {created}; per volt of the drive's reading; uncertainties without what "
        "both share (wavelength, index, converter's scale, drive's reading, extremes)"
    )
    return f"{table(rows, header)}\n{note}"
