"""Watching one line: each new result judged against all before it; alarms where it has shifted."""

from collections.abc import Sequence
from dataclasses import dataclass
from typing import Any

from calibration.desk.cusum import Cusum, CusumRule
from calibration.desk.line_entry import LineEntry
from calibration.desk.self_starting import SelfStarting
from calibration.desk.temperature_law import TemperatureLaw
from metro.measured import Measured

__all__ = ["Alarm", "LineAlarms", "alarms_in"]

_LARGEST_SCORE = 5.0
"""What one result may add, in standard deviations: a single outlier is no lasting shift."""


@dataclass(frozen=True)
class Alarm:
    """A lasting shift of a line.

    Parameters
    ----------
    time : str
        Of the result that raised it, UTC.
    since : str
        Of the result with which the shift seems to have begun.
    line_hz : float
        The line [Hz].
    shift : Measured
        Size, signed, in the unit of the results; rough, its u unknown.
    sigma : float
        Size over the standard deviation of a result.
    bench : str
        Which bench.
    """

    time: str
    since: str
    line_hz: float
    shift: Measured
    sigma: float
    bench: str = "bench"

    def __str__(self) -> str:
        from metro.display import show

        size = show(float(self.shift.magnitude), self.shift.unit, 2)
        return (
            f"line at {self.line_hz:.9g} Hz has shifted by about {size} "
            f"({self.sigma:+.2g} standard deviations) since {self.since}"
        )

    def to_dict(self) -> dict[str, Any]:
        """Return the JSON form."""
        return {
            "bench": self.bench,
            "time": self.time,
            "since": self.since,
            "line": Measured.of(self.line_hz, "Hz"),
            "shift": self.shift,
            "sigma": self.sigma,
            "message": str(self),
        }


class LineAlarms:
    """Cumulative sums over the results of one line, as they come.

    Parameters
    ----------
    rule : CusumRule
        When to raise an alarm.
    law : TemperatureLaw
        How results follow temperature.
    """

    def __init__(self, rule: CusumRule, law: TemperatureLaw) -> None:
        self.rule, self.law = rule, law
        self._sums = Cusum(rule)
        self._state = SelfStarting(1 if law.is_fitted else 0)
        self._scale = 0.0
        self._first_k = 0.0
        self._temperature_sum = 0.0
        self._count = 0
        self._times: list[str] = []  # since the sums were last zero
        self.sums = (0.0, 0.0)
        """Both sums after the last result, upward and downward, in standard deviations; those that
        raised an alarm too."""
        self.left_out = 0
        """Results that were not trustworthy or lacked a temperature."""

    def add(self, entry: LineEntry) -> Alarm | None:
        """Take a result.

        Parameters
        ----------
        entry : LineEntry
            Later than those before.

        Returns
        -------
        Alarm or None
            After an alarm everything begins anew, at the level that the line has then.
        """
        if not entry.is_trustworthy or not self.law.holds(entry):
            self.left_out += 1
            return None
        score = self._score(entry)
        if score is None:
            return None
        side = self._sums.add(max(-_LARGEST_SCORE, min(_LARGEST_SCORE, score)))
        self.sums = (self._sums.high, self._sums.low)
        run = max(self._sums.high_run, self._sums.low_run)
        self._times = [*self._times, entry.time][-run:] if run else []
        if not side:
            return None
        alarm = self._alarm(entry, side)
        self._sums.reset()
        self._state.restart()
        self._times, self._count, self._temperature_sum = [], 0, 0.0
        return alarm

    def _score(self, entry: LineEntry) -> float | None:
        value, kelvin = float(entry.value.magnitude), entry.temperature_k or 0.0
        if not self._scale:
            self._scale, self._first_k = abs(value) or 1.0, kelvin
        given = self.law if not self.law.is_fitted else TemperatureLaw()
        relative = given.corrected(value, kelvin, self._first_k) / self._scale - 1.0
        mean_k = self._temperature_sum / self._count if self._count else kelvin
        self._temperature_sum += kelvin
        self._count += 1
        regressors = (kelvin - self._first_k,) if self.law.is_fitted else ()
        uncertain = given.u * (kelvin - mean_k) if self.law.is_used else 0.0
        return self._state.add(relative, regressors, uncertain**2)

    def _alarm(self, entry: LineEntry, side: int) -> Alarm:
        sigma, run = self._sums.shift(side), self._sums.run(side)
        return Alarm(
            entry.time,
            self._times[-run] if run <= len(self._times) else entry.time,
            entry.line_hz,
            Measured.of(sigma * self._state.sigma * self._scale, entry.value.unit),
            sigma,
            entry.bench,
        )


def alarms_in(entries: Sequence[LineEntry], law: TemperatureLaw, rule: CusumRule) -> list[Alarm]:
    """Return the alarms in a row of results.

    Parameters
    ----------
    entries : sequence of LineEntry
        Of one line, in the order of time.
    law : TemperatureLaw
        How results follow temperature.
    rule : CusumRule
        When to raise an alarm.

    Returns
    -------
    list of Alarm
        In the order of time.
    """
    judge = LineAlarms(rule, law)
    found = (judge.add(entry) for entry in entries)
    return [alarm for alarm in found if alarm is not None]
