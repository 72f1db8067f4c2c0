"""What the ledger tells a person: entries, charts, agreement."""

from typing import TYPE_CHECKING, Any

if TYPE_CHECKING:
    from collections.abc import Sequence

    from calibration.desk.agreement import Agreement
    from calibration.desk.line_chart import LineChart

__all__ = ["agreement_text", "chart_text", "entry_row"]


def entry_row(entry: Any) -> list[object]:  # noqa: ANN401  # either kind of entry
    """Return an entry as cells: time, bench, what, value, trust."""
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


def chart_text(chart: "LineChart") -> str:
    """Return a line's chart as a table: limits, alarms, drift, averaging."""
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


def agreement_text(found: "Sequence[Agreement]", created: str) -> str:
    """Return comparisons with the calibration in force as a table and a note."""
    from metro.output import table

    rows = [
        [
            f"{each.entry.line_hz:.9g} Hz",
            str(each.measured),
            str(each.expected),
            f"{100 * each.relative_difference:+.3g} %",
            f"{each.normalised_error:.2f}",
            *_phase_cells(each),
            "agrees" if each.is_agreed else "does not agree",
        ]
        for each in found
    ]
    header = ["line", "measured", "calibration", "difference", "difference/U"]
    header += ["phase difference", "difference/U", "verdict"]
    note = (
        f"calibration in force: {created}; compared: magnitude, and phase where it is known; per volt of the drive's reading; uncertainties without what "
        "both share (wavelength, index, converter's scale, drive's reading, extremes)"
    )
    return f"{table(rows, header)}\n{note}"


def _phase_cells(each: "Agreement") -> list[object]:
    if each.phase is None:
        return ["not known", ""]
    return [
        f"{1e3 * float(each.phase.difference.magnitude):+.3g} mrad",
        f"{each.phase.normalised_error:.2f}",
    ]
