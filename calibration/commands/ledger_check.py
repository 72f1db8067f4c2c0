"""``midfringe ledger check``: whether today's lines agree with the calibration in force."""

import click

from calibration.desk.judging_options import Judging, judging_options
from calibration.desk.ledger_options import ledger_options, tell
from calibration.desk.sourcing_options import Sourcing, sourcing_options
from metro.options import command, distrust, output_options

__all__ = ["check"]


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
    from calibration.desk.ledger_charts import alarms_of, by_line
    from calibration.desk.ledger_errors import LedgerError
    from calibration.desk.ledger_texts import agreement_text
    from calibration.desk.utc import now
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
            entries = sourcing.entries(result, in_force.calibration, bench, now())
        if not entries:
            raise LedgerError(f"the ledger {kept.name} has no line result since the calibration")
        alarms = alarms_of(kept, bench, law, judging.rule)
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
    click.echo(to_json(document) if as_json else agreement_text(found, in_force.created))
    tell(list(dict.fromkeys(caution for each in found for caution in each.cautions)))
    if reasons:
        distrust(reasons)
