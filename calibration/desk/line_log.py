"""Line results of a running recording: fitted beside it, kept in the ledger, judged as they come."""

import logging
import queue
import threading
from collections import deque
from collections.abc import Callable
from contextlib import suppress
from dataclasses import dataclass, field, replace

import numpy as np

from calibration.desk.cusum import CusumRule
from calibration.desk.ledger import Ledger
from calibration.desk.ledger_charts import by_line, start_of
from calibration.desk.ledger_errors import LedgerError, LedgerFailedError
from calibration.desk.line_alarms import Alarm, LineAlarms
from calibration.desk.line_entry import LineEntry
from calibration.desk.line_window import Stretch
from calibration.desk.logged_channels import LoggedChannels
from calibration.desk.measured_lines import Measuring
from calibration.desk.temperature_law import TemperatureLaw
from calibration.errors import CalibrationError

__all__ = ["LineLog", "LogPlan"]

_log = logging.getLogger(__name__)

_MOST_WAITING = 10_000  # results that wait for a ledger that failed: a week of them, some MB


@dataclass(frozen=True)
class LogPlan:
    """What is measured while logging.

    Parameters
    ----------
    measuring : Measuring
        How lines are measured; its calibration is that in force when the log begins.
    is_metres : bool
        Whether lines are measured by the fringe of the calibration in force, whichever it is.
    bench : str
        Which bench.
    law : TemperatureLaw
        How results follow temperature.
    rule : CusumRule
        When to raise an alarm.
    source : str
        The port, for the ledger.
    """

    measuring: Measuring
    is_metres: bool
    bench: str
    law: TemperatureLaw
    rule: CusumRule
    source: str


@dataclass
class _Judges:
    """The alarms of each line, fed with what the ledger holds since the calibration in force."""

    plan: LogPlan
    by_key: dict[tuple[float, str, bool], LineAlarms] = field(default_factory=dict)

    def add(self, entry: LineEntry) -> Alarm | None:
        key = (entry.line_hz, entry.value.unit, entry.is_ratio)
        if key not in self.by_key:
            self.by_key[key] = LineAlarms(self.plan.rule, self.plan.law)
        return self.by_key[key].add(entry)


class LineLog:
    """A thread that fits lines, keeps results and raises alarms while a recording runs.

    Parameters
    ----------
    ledger : Ledger
        Where results are kept.
    plan : LogPlan
        What is measured.
    on_alarm : callable, optional
        Takes each alarm, in the thread.
    """

    def __init__(
        self, ledger: Ledger, plan: LogPlan, on_alarm: Callable[[Alarm], None] | None = None
    ) -> None:
        self._ledger, self._plan, self._on_alarm = ledger, plan, on_alarm
        self._measuring = plan.measuring
        self._in_force = ""
        self._judges = self._fed()
        self._waiting: deque[LineEntry] = deque(maxlen=_MOST_WAITING)
        self._is_failing = False
        self._told: set[str] = set()
        self._queue: queue.Queue[tuple[Stretch, LoggedChannels] | None] = queue.Queue(maxsize=2)
        self._thread = threading.Thread(target=self._run, name="line results", daemon=True)
        self.results = 0
        """Line results in the ledger."""
        self.alarms: list[Alarm] = []
        self.failure: BaseException | None = None
        """The first thing that went wrong unforeseen, if anything did."""
        self.lost = 0
        """Results that the ledger, failing to the end, did not take."""
        self._thread.start()

    @property
    def lines_hz(self) -> tuple[float, ...]:
        """Frequencies of the lines that are measured [Hz]."""
        return tuple(self._measuring.lines_hz)

    def put(self, stretch: Stretch, channels: LoggedChannels) -> None:
        """Hand on a stretch; it never waits.

        Parameters
        ----------
        stretch : Stretch
            Samples.
        channels : LoggedChannels
            What they are.
        """
        try:
            self._queue.put_nowait((stretch, channels))
        except queue.Full:
            _log.warning("a line result is left out: the ones before are not done yet")

    def close(self) -> None:
        """Finish what has been handed on, and end the thread."""
        self._queue.put(None)
        self._thread.join()
        self._keep([])
        self.lost = len(self._waiting)

    @property
    def reasons(self) -> list[str]:
        """Why the lines, or their results, must not be trusted."""
        found = [str(alarm) for alarm in self.alarms]
        if self.lost:
            found.append(f"{self.lost} line results are lost: the ledger failed to the end")
        if self.failure is not None:
            found.append(f"line results are missing: {self.failure}")
        return found

    def _run(self) -> None:
        while (item := self._queue.get()) is not None:
            try:
                self._take(*item)
            except Exception as error:  # noqa: BLE001  # the recording must go on
                self.failure = self.failure or error
                _log.error("no line result: %s", error)  # one line each

    def _take(self, stretch: Stretch, channels: LoggedChannels) -> None:
        self._renew()
        try:
            entries = self._entries(stretch, channels)
        except CalibrationError as error:
            _log.warning("no line result: %s", error)
            return
        self._keep(entries)
        for entry in entries:
            said = "; ".join(entry.reasons)
            _log.info(
                "%.9g Hz: %s%s",
                entry.line_hz,
                entry.value,
                f"; not to be trusted: {said}" * bool(said),
            )
            alarm = self._judges.add(entry)
            if alarm is not None:
                self.alarms.append(alarm)
                _log.warning("alarm: %s", alarm)
                if self._on_alarm is not None:
                    self._on_alarm(alarm)

    def _entries(self, stretch: Stretch, channels: LoggedChannels) -> list[LineEntry]:
        columns = dict(zip(channels.used, stretch.values.T, strict=True))
        measuring = self._measuring
        light = measuring.in_volts("photodiode", channels.unit, columns[channels.photodiode])
        read = None if channels.drive is None else columns[channels.drive]
        drive = None if read is None else measuring.in_volts("drive", channels.drive_unit, read)
        self._tell((*light.cautions, *(() if drive is None else drive.cautions)))
        duration_s = len(stretch.values) / channels.rate_hz
        fit = measuring.fit(
            light.values,
            None if drive is None else drive.values,
            channels.rate_hz,
            unit=light.unit,
            drive_unit="V" if drive is None else drive.unit,
            over_range=stretch.over_range,
        )
        kelvin = None
        if channels.temperature is not None:
            read = columns[channels.temperature]
            kelvin = float(np.nanmean(read)) + channels.zero_k if np.isfinite(read).any() else None
        entries = []
        for line, named_hz in zip(fit.lines, measuring.lines_hz, strict=True):
            try:
                entry = LineEntry.of_line(
                    replace(line, frequency_hz=named_hz),
                    unix_s=stretch.ended_unix_s - 0.5 * duration_s / channels.speed,
                    duration_s=duration_s,
                    source=self._plan.source,
                    temperature_k=kelvin,
                    bench=self._plan.bench,
                )
            except LedgerError as error:
                _log.warning("no line result: %s", error)
            else:
                entries.append(entry)
        return entries

    def _tell(self, cautions: tuple[str, ...]) -> None:
        """Say what is taken for granted, once."""
        for caution in cautions:
            if caution not in self._told:
                self._told.add(caution)
                _log.warning("%s", caution)

    def _keep(self, entries: list[LineEntry]) -> None:
        """Put results into the ledger; where it fails they wait for the next time."""
        self._waiting.extend(entries)
        if not self._waiting:
            return
        try:
            self.results += self._ledger.add_line_results(self._waiting)
        except LedgerFailedError as error:
            if not self._is_failing:
                _log.warning("%s; results wait", error)
            self._is_failing = True
            return
        if self._is_failing:
            _log.warning("the ledger is back; %d results had waited", len(self._waiting))
        self._is_failing = False
        self._waiting.clear()

    def _renew(self) -> None:
        """Take the calibration that is in force now."""
        if not self._plan.is_metres:
            return
        with suppress(LedgerFailedError):  # the one before stays
            found = self._ledger.in_force(self._plan.bench)
            if found is None or found.sha256 == self._in_force:
                return
            if self._in_force:
                _log.warning("the calibration of %s is in force now", found.created)
                self._judges = self._fed()
            self._in_force = found.sha256
            self._measuring = replace(self._measuring, calibration=found.calibration)

    def _fed(self) -> _Judges:
        judges = _Judges(self._plan)
        since = start_of(self._ledger, self._plan.bench, None, whole=False)
        held = self._ledger.line_results(bench=self._plan.bench, since=since)
        for group in by_line(held):
            for entry in group:
                named = self._named(entry.line_hz)
                if named is not None:
                    judges.add(replace(entry, line_hz=named))
        return judges

    def _named(self, line_hz: float) -> float | None:
        """Return the line of the plan that a frequency in the ledger is."""
        for named_hz in self._measuring.lines_hz:
            if abs(line_hz - named_hz) <= 1e-3 * named_hz:
                return named_hz
        return None
