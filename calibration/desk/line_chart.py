"""A line over time: control limits, run rules, alarms, drift, and how long averaging helps."""

from collections.abc import Sequence
from dataclasses import dataclass
from typing import Any

import numpy as np
from numpy.typing import NDArray

from calibration.desk.allan import AllanDeviation, allan_deviation
from calibration.desk.control_chart import (
    FEWEST,
    ControlLimits,
    individual_limits,
    sample_limits,
    samples_of,
)
from calibration.desk.cusum import CusumRule
from calibration.desk.drift import Drift, drift_of, lag_one
from calibration.desk.ledger_errors import LedgerError
from calibration.desk.line_alarms import Alarm, LineAlarms
from calibration.desk.line_entry import LineEntry
from calibration.desk.run_rules import RuleHit, run_rules
from calibration.desk.temperature_law import TemperatureLaw, fitted_coefficient
from metro.measured import Measured

__all__ = ["RUN_LENGTH", "LineChart", "chart_line"]

FloatArray = NDArray[np.float64]

RUN_LENGTH = 100_000.0
"""Results between two false alarms, on average: eleven years of hourly ones, ten weeks of those a
minute."""

_CLEAR = 2.0  # standard deviations of an autocorrelation from which it is told from none


@dataclass(frozen=True, eq=False)
class LineChart:
    """What the results of one line say.

    Parameters
    ----------
    bench : str
        Which bench.
    line_hz : float
        The line [Hz].
    unit : str
        Of the results.
    time_s : ndarray, shape (n,)
        Moments of the results charted, seconds since 1970.
    values, u : ndarray, shape (n,)
        Results corrected for temperature, and their own u (NaN where unknown).
    raw : ndarray, shape (n,)
        As measured.
    law : TemperatureLaw
        The correction.
    reference_k : float or None
        The temperature that results are corrected to [K].
    limits : ControlLimits or None
        None for too few results.
    points : ndarray, shape (p,)
        What the limits are about: the results, or the means of samples.
    rules : list of RuleHit
        Information only.
    rule : CusumRule
        Of the alarms.
    alarms : list of Alarm
        In the order of time.
    sums : ndarray, shape (n, 2)
        The cumulative sums after each result, upward and downward.
    drift : Drift or None
        None for too few results.
    allan : AllanDeviation or None
        None for too few results.
    cautions : list of str
        What a reader should know.
    """

    bench: str
    line_hz: float
    unit: str
    time_s: FloatArray
    values: FloatArray
    u: FloatArray
    raw: FloatArray
    law: TemperatureLaw
    reference_k: float | None
    limits: ControlLimits | None
    points: FloatArray
    rules: list[RuleHit]
    rule: CusumRule
    alarms: list[Alarm]
    sums: FloatArray
    drift: Drift | None
    allan: AllanDeviation | None
    cautions: list[str]

    def to_dict(self) -> dict[str, Any]:
        """Return the JSON form."""
        reference = self.reference_k
        return {
            "bench": self.bench,
            "line": Measured.of(self.line_hz, "Hz"),
            "results": len(self.values),
            "mean": Measured.of(float(self.values.mean()), self.unit),
            "temperature": {
                "coefficient": self.law.measured if self.law.is_used else None,
                "fitted": self.law.is_fitted,
                "reference": None if reference is None else Measured.of(reference, "K"),
            },
            "limits": None if self.limits is None else self.limits.to_dict(self.unit),
            "rules": [{"rule": hit.rule, "point": hit.point} for hit in self.rules],
            "cusum": {
                "k": self.rule.k,
                "h": self.rule.h,
                "results_between_false_alarms": self.rule.run_length,
            },
            "alarms": self.alarms,
            "drift": self.drift,
            "allan": self.allan,
            "cautions": self.cautions,
        }


def chart_line(
    entries: Sequence[LineEntry],
    *,
    law: TemperatureLaw | None = None,
    rule: CusumRule | None = None,
    sample: int = 1,
    baseline: int = 100,
    reference_k: float | None = None,
) -> LineChart:
    """Return the chart of one line.

    Parameters
    ----------
    entries : sequence of LineEntry
        Of one line and unit, in the order of time; distrusted ones are left out.
    law : TemperatureLaw, optional
        How results follow temperature; by default they do not.
    rule : CusumRule, optional
        Of the alarms; by default for one false alarm in `RUN_LENGTH` results.
    sample : int
        Results a point of the control chart, 1 for individual ones.
    baseline : int
        From how many results, the first ones, the control limits come.
    reference_k : float, optional
        Temperature that results are corrected to [K]; by default their mean.

    Returns
    -------
    LineChart
        Everything about the line.

    Raises
    ------
    LedgerError
        If there is no trustworthy result, or the units differ.
    """
    rule = CusumRule.for_run_length(RUN_LENGTH) if rule is None else rule
    law = TemperatureLaw() if law is None else law
    used = [entry for entry in entries if entry.is_trustworthy and law.holds(entry)]
    _check_entries(entries, used)
    judge, alarms, sums = LineAlarms(rule, law), [], []
    for entry in used:
        alarm = judge.add(entry)
        alarms += [alarm] if alarm else []
        sums.append(judge.sums)
    shown = fitted_coefficient(used) if law.is_fitted else law
    kelvin = [entry.temperature_k for entry in used if entry.temperature_k is not None]
    reference = float(np.mean(kelvin)) if reference_k is None and kelvin else reference_k
    raw = np.array([float(entry.value.magnitude) for entry in used])
    values = np.array(
        [
            shown.corrected(float(entry.value.magnitude), entry.temperature_k, reference or 0.0)
            for entry in used
        ]
    )
    time_s = np.array([entry.unix_s for entry in used])
    u = np.array([np.nan if e.value.u_magnitude is None else e.value.u_magnitude for e in used])
    unit = used[0].value.unit
    limits, points = _limits(values, sample, baseline)
    return LineChart(
        used[0].bench,
        float(np.median([entry.line_hz for entry in used])),
        unit,
        time_s,
        values,
        u,
        raw,
        shown,
        reference if shown.is_used else None,
        limits,
        points,
        [] if limits is None else run_rules(points, limits.centre, limits.point_sigma),
        rule,
        alarms,
        np.array(sums),
        drift_of(time_s, values, u, unit),
        allan_deviation(time_s, values, unit),
        _cautions(entries, used, shown, kelvin, values, alarms),
    )


def _check_entries(entries: Sequence[LineEntry], used: Sequence[LineEntry]) -> None:
    if not used:
        raise LedgerError(
            f"of {len(entries)} results none is trustworthy and holds what the chart needs"
        )
    kinds = {(entry.value.unit, entry.is_ratio) for entry in used}
    if len(kinds) > 1:
        units = ", ".join(sorted(f"{'ratio' if r else 'amplitude'} in {u}" for u, r in kinds))
        raise LedgerError(
            f"the results of the line at {used[0].line_hz:g} Hz are not alike: {units}; "
            "--since leaves the older ones out"
        )


def _limits(
    values: FloatArray, sample: int, baseline: int
) -> tuple[ControlLimits | None, FloatArray]:
    if sample > 1:
        points: FloatArray = samples_of(values, sample).mean(axis=1)
        first = values[: max(baseline, FEWEST * sample)]
        return (None if len(first) < FEWEST * sample else sample_limits(first, sample)), points
    first = values[: max(baseline, FEWEST)]
    limits = None if len(first) < FEWEST else individual_limits(first)
    return (limits if limits is not None and limits.sigma > 0 else None), values


def _cautions(
    entries: Sequence[LineEntry],
    used: Sequence[LineEntry],
    law: TemperatureLaw,
    kelvin: Sequence[float],
    values: FloatArray,
    alarms: Sequence[Alarm],
) -> list[str]:
    found = []
    left_out = len(entries) - len(used)
    if left_out:
        found.append(f"{left_out} results were left out: not trustworthy, or without a temperature")
    if not law.is_used and len(kelvin) > 1 and np.ptp(kelvin) > 1.0:
        found.append(
            f"the temperature moved by {np.ptp(kelvin):.2g} K and results are not corrected for it "
            "(--temperature-coefficient)"
        )
    if not law.is_used and not kelvin:
        found.append(
            "no temperature is known: what it does to the line looks like a shift or drift"
        )
    if alarms:
        found.append("drift and Allan deviation are taken over the shifts too")
    steady = [k for k, entry in enumerate(used) if not alarms or entry.time < alarms[0].since]
    first = values[steady]
    r = lag_one(first - first.mean()) if len(first) >= FEWEST else 0.0
    if r > max(0.2, _CLEAR / np.sqrt(len(first))):
        found.append(
            f"neighbouring results hang together (autocorrelation {r:.2f}): limits are too narrow "
            "and alarms come more often than said"
        )
    return found
