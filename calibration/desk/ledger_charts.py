"""The charts of a bench's lines, from the ledger."""

from bisect import bisect_right
from collections.abc import Sequence
from itertools import pairwise
from typing import Any

from calibration.desk.cusum import CusumRule
from calibration.desk.ledger import Ledger
from calibration.desk.ledger_errors import LedgerError
from calibration.desk.line_chart import LineChart, chart_line
from calibration.desk.line_entry import LineEntry
from calibration.desk.temperature_law import TemperatureLaw

__all__ = ["alarms_of", "by_line", "charts_of", "start_of"]

_SAME_LINE = 1e-3


def start_of(ledger: Ledger, bench: str, since: str | None, *, whole: bool) -> str | None:
    """Return from when results are judged: as asked, else from the calibration in force.

    Parameters
    ----------
    ledger : Ledger
        Where it is looked up.
    bench : str
        Which bench.
    since : str or None
        As asked, as the ledger keeps times.
    whole : bool
        From the beginning.

    Returns
    -------
    str or None
        None for the beginning.
    """
    if whole or since is not None:
        return since
    in_force = ledger.in_force(bench)
    return None if in_force is None else in_force.created


def by_line(entries: Sequence[LineEntry]) -> list[list[LineEntry]]:
    """Return results line by line, by frequency, each in the order given.

    Parameters
    ----------
    entries : sequence of LineEntry
        Of one bench.

    Returns
    -------
    list of list of LineEntry
        Frequencies within a part in a thousand of their neighbour are one line; ratios, amplitudes and
        other units of it stay apart.
    """
    frequencies = sorted({entry.line_hz for entry in entries})
    edges = [b for a, b in pairwise(frequencies) if b - a > _SAME_LINE * b]
    groups: dict[tuple[int, bool, str], list[LineEntry]] = {}
    for entry in entries:
        key = (bisect_right(edges, entry.line_hz), entry.is_ratio, entry.value.unit)
        groups.setdefault(key, []).append(entry)
    return [groups[key] for key in sorted(groups)]


def charts_of(
    ledger: Ledger,
    bench: str,
    *,
    lines_hz: Sequence[float] = (),
    since: str | None = None,
    until: str | None = None,
    law: TemperatureLaw | None = None,
    rule: CusumRule | None = None,
    sample: int = 1,
    baseline: int = 100,
) -> tuple[list[LineChart], list[LineEntry]]:
    """Return the charts of a bench's lines and the results behind them.

    Parameters
    ----------
    ledger : Ledger
        Where results are.
    bench : str
        Which bench.
    lines_hz : sequence of float
        Which lines [Hz]; all where empty.
    since, until : str or None
        From and before these moments, as the ledger keeps times.
    law : TemperatureLaw, optional
        As for :func:`calibration.desk.chart_line`, like all that follow.
    rule : CusumRule, optional
        Of the alarms.
    sample : int
        Results a point.
    baseline : int
        Results that the limits come from.

    Returns
    -------
    tuple of (list of LineChart, list of LineEntry)
        By frequency.

    Raises
    ------
    LedgerError
        If there is no result to chart.
    """
    found = ledger.line_results(bench=bench, since=since, until=until)
    groups = by_line(found)
    if lines_hz:
        groups = [g for line_hz in lines_hz for g in _groups_at(groups, line_hz, ledger, since)]
    if not groups:
        after = f" since {since}" if since else ""
        raise LedgerError(f"the ledger {ledger.name} has no line result of {bench!r}{after}")
    in_force = ledger.in_force(bench, until)
    temperature = None
    if in_force is not None:
        temperature = in_force.calibration.conditions.get("temperature")
    charts = [
        chart_line(
            group,
            law=law,
            rule=rule,
            sample=sample,
            baseline=baseline,
            reference_k=None if temperature is None else float(temperature.magnitude),
        )
        for group in groups
    ]
    return charts, [entry for group in groups for entry in group]


def _groups_at(
    groups: Sequence[list[LineEntry]], line_hz: float, ledger: Ledger, since: str | None
) -> list[list[LineEntry]]:
    reach = _SAME_LINE * line_hz
    found = [g for g in groups if any(abs(entry.line_hz - line_hz) <= reach for entry in g)]
    if not found:
        after = f" since {since}" if since else ""
        raise LedgerError(
            f"the ledger {ledger.name} has no result of a line at {line_hz:g} Hz{after}"
        )
    return found


def alarms_of(kept: Ledger, bench: str, law: TemperatureLaw, rule: CusumRule) -> list[Any]:
    """Return a bench's alarms since its calibration in force."""
    from calibration.desk.line_alarms import alarms_in

    entries = kept.line_results(bench=bench, since=start_of(kept, bench, None, whole=False))
    return [alarm for group in by_line(entries) for alarm in alarms_in(group, law, rule)]
