"""A session's recordings and the bench file turned into a calibration.

Extremes from the scans; each lines recording inverted to optical phase on its slope and its lines
fitted there; both slopes put together; wavelength, index and drive turn radians per volt into
metres per volt. Every input leaves a row in the budget, every gap in the session a caution.
"""

from collections.abc import Sequence
from dataclasses import dataclass
from datetime import UTC, datetime
from functools import cached_property
from math import sqrt
from os import PathLike

import numpy as np

from calibration.actuator import actuator_line
from calibration.bench_check import check_bench
from calibration.contrast import contrast
from calibration.dark import dark_level
from calibration.errors import CalibrationError
from calibration.extremes import Extremes
from calibration.line_fit import LineFit
from calibration.lines import fit_lines_si
from calibration.mains import without_mains
from calibration.pickup import additive_of
from calibration.readout import Readout
from calibration.readout_slope import readout_slope
from calibration.record import ActuatorEntry, Calibration
from calibration.scan import ScanFit, fit_scan
from calibration.session import RoleRecord, Session
from calibration.session_checks import (
    cautions_of,
    failed,
    reasons_of,
    repeat_checks,
    role_reasons,
    scan_checks,
    sign_reasons,
)
from calibration.slope_line import CombinedLine, SlopeLine, combine, is_driven
from calibration.statements import assumptions, chain_values, conditions
from calibration.term import POWER_DRIFT, Term
from calibration.working_point import PhaseRecord, invert_fringe
from metro.bench import Bench
from metro.drive import peak_factor
from metro.measured import Measured

__all__ = ["calibrate"]

Paths = Sequence[str | PathLike[str]]

ASSUMED_DRIFT = 0.002  # relative change of high − low between recordings, where nothing is known


def calibrate(
    bench: Bench,
    *,
    dark: Paths = (),
    pickup: Paths = (),
    blocked_x: Paths = (),
    blocked_y: Paths = (),
    scan: Paths = (),
    lines_rising: Paths = (),
    lines_falling: Paths = (),
) -> Calibration:
    """Return the calibration of a session.

    Parameters
    ----------
    bench : Bench
        Needs the wavelength with its source, the air (or vacuum), and the lines.
    dark : sequence of path
        Recordings with the beam blocked and the drive off.
    pickup : sequence of path
        Beam blocked, drive on.
    blocked_x, blocked_y : sequence of path
        One arm blocked, the other alone, drive on.
    scan : sequence of path
        Over whole fringes; may be left out if the bench gives ``fringe.low`` and ``fringe.high``.
    lines_rising, lines_falling : sequence of path
        Lines driven, on the two slopes; at least one of them.

    Returns
    -------
    Calibration
        Metres per volt at each line, volts per metre of the readout, budgets and cautions.

    Raises
    ------
    CalibrationError
        If the bench or the session lacks what cannot be done without.
    BridgeError
        If a recording cannot be read.
    """
    check_bench(bench)
    files = {
        "dark": dark,
        "pickup": pickup,
        "blocked-x": blocked_x,
        "blocked-y": blocked_y,
        "scan": scan,
        "lines-rising": lines_rising,
        "lines-falling": lines_falling,
    }
    return _Analysis(bench, Session(files, bench)).calibration()


@dataclass(frozen=True)
class _Slope:
    """One lines recording inverted and fitted."""

    record: RoleRecord
    phase: PhaseRecord
    fit: LineFit


class _Analysis:
    """The steps of one calibration; each is computed once, from those before it."""

    def __init__(self, bench: Bench, session: Session) -> None:
        self.bench, self.session = bench, session
        self.readout = Readout(bench)
        self.frequencies_hz = [line.frequency_hz for line in bench.lines]

    @cached_property
    def scans(self) -> list[ScanFit]:
        """The fringe's extremes in each scan, the mains taken out."""
        mains_hz = self.bench.magnitude("mains.frequency", 50.0)
        traces = [record.photodiode for record in self.session.of("scan")]
        return [
            fit_scan(without_mains(trace.values, trace.rate_hz, mains_hz), trace.rate_hz)
            for trace in traces
        ]

    @cached_property
    def extremes(self) -> Extremes:
        """The mean extremes of the scans, else those that the bench file gives."""
        if self.scans:
            return Extremes.mean_of(self.scans)
        low, high = self.bench.get("fringe.low"), self.bench.get("fringe.high")
        if low is None or high is None:
            raise CalibrationError(
                "a calibration needs the fringe's extremes: at least one --scan FILE, "
                "or both --low and --high, got neither"
            )
        u = [float(v.u_magnitude or 0.0) ** 2 for v in (low, high)]
        return Extremes(low.magnitude, high.magnitude, np.diag(u))

    @cached_property
    def drift(self) -> Term:
        """Relative change of high − low from one recording to the next."""
        name = POWER_DRIFT
        if self.bench.get("fringe.drift") is not None:
            u, kind = self.bench.u("fringe.drift"), self.bench.distribution("fringe.drift")
            return Term(name, 0.0, "1", u, distribution=kind)
        if len(self.scans) > 1:
            swings = [scan.high - scan.low for scan in self.scans]
            u = float(np.std(swings, ddof=1) / np.mean(swings))
            return Term(name, 0.0, "1", u, kind="A", dof=len(swings) - 1)
        u = ASSUMED_DRIFT / sqrt(3.0)
        return Term(f"{name} (assumed)", 0.0, "1", u, distribution="rectangular")

    @cached_property
    def slopes(self) -> list[_Slope]:
        """Every lines recording, inverted and fitted."""
        return [
            self._slope(record, slope)
            for slope in ("rising", "falling")
            for record in self.session.of(f"lines-{slope}")
        ]

    def _slope(self, record: RoleRecord, slope: str) -> _Slope:
        phase = invert_fringe(record.photodiode.values, self.extremes, slope)
        return _Slope(record, phase, self._fit(record, phase.phase_rad, "rad"))

    def _fit(self, record: RoleRecord, values: np.ndarray, unit: str) -> LineFit:
        return fit_lines_si(
            values,
            record.photodiode.rate_hz,
            self.frequencies_hz,
            None if record.drive is None else record.drive.values,
            mains_hz=self.bench.magnitude("mains.frequency", 50.0),
            value_unit=unit,
            drive_unit="V",
        )

    @cached_property
    def blocked_fits(self) -> dict[str, list[LineFit]]:
        """Line fits in volts of the recordings without a fringe, by role."""
        return {
            role: [self._fit(r, r.photodiode.values, "V") for r in self.session.of(role)]
            for role in ("pickup", "blocked-x", "blocked-y")
        }

    @cached_property
    def dark(self) -> Measured | None:
        """The level without light, measured or as the bench file gives it."""
        records = [record.photodiode.values for record in self.session.of("dark")]
        measured = dark_level(records)
        return self.bench.get("photodiode.dark") if measured is None else measured

    def _slope_lines(self, number: int) -> dict[str, list[SlopeLine]]:
        """Return one line in every recording that drives it, by slope."""
        parts: dict[str, list[SlopeLine]] = {"rising": [], "falling": []}
        for slope in self.slopes:
            line = slope.fit.lines[number]
            if is_driven(line):
                kind, means = slope.phase.slope, slope.phase.means
                parts[kind].append(SlopeLine.of(kind, line, means, self._setting_v(number)))
        return parts

    def _by_slope(self) -> list[tuple[float, list[SlopeLine]]]:
        """Return each line's recordings on one slope, with its frequency [Hz]."""
        return [
            (frequency_hz, records)
            for number, frequency_hz in enumerate(self.frequencies_hz)
            for records in self._slope_lines(number).values()
        ]

    def combined(self, number: int) -> CombinedLine:
        """Return one line with both slopes put together."""
        parts = self._slope_lines(number)
        if not (parts["rising"] or parts["falling"]):
            raise CalibrationError(
                f"the line at {self.frequencies_hz[number]:g} Hz is driven in no lines recording"
            )
        blocked = {
            role: [fit.lines[number] for fit in fits if is_driven(fit.lines[number])]
            for role, fits in self.blocked_fits.items()
        }
        additive = additive_of(blocked["pickup"], blocked["blocked-x"], blocked["blocked-y"])
        return combine(parts["rising"], parts["falling"], self.extremes.swing_v, additive)

    def _setting_v(self, number: int) -> float | None:
        """Return the drive of a line as the bench file states it, zero to peak [V]."""
        stated = self.bench.lines[number].drive_v
        return None if stated is None else stated * peak_factor(self.bench)

    def actuator(self) -> list[ActuatorEntry]:
        """Return metres per volt at every line."""
        drive_read = self.slopes[0].record.drive is not None
        dark_v = 0.0 if self.dark is None else float(self.dark.magnitude)
        return [
            actuator_line(
                number,
                self.combined(number),
                self.extremes,
                self.readout,
                self.drift,
                drive_read=drive_read,
                dark_v=dark_v,
            )
            for number in range(len(self.frequencies_hz))
        ]

    def clock_offset(self) -> Measured | None:
        """Return the mean relative clock offset of the lines recordings, None if unknown."""
        found = [slope.fit.clock_offset for slope in self.slopes]
        known = [offset for offset in found if offset is not None and offset.u_magnitude]
        if not known:
            return None
        weights = np.array([1.0 / offset.u_magnitude**2 for offset in known])
        values = np.array([offset.magnitude for offset in known])
        mean, u = float(weights @ values / weights.sum()), float(weights.sum() ** -0.5)
        return Measured.of(mean, "1", u, sum(offset.dof for offset in known))

    def calibration(self) -> Calibration:
        """Return everything together."""
        from metro import __version__

        actuator = self.actuator()
        slope, budget = readout_slope(self.readout, self.extremes, self.drift)
        fits = [(s.record.path, s.phase, s.fit) for s in self.slopes]
        checks = [
            *scan_checks(self.scans, self.drift),
            *repeat_checks(self._by_slope(), self.drift),
        ]
        return Calibration(
            created=datetime.now(UTC).isoformat(timespec="seconds"),
            software=__version__,
            actuator=sign_reasons(self.bench, actuator),
            readout_slope=slope,
            readout_budget=budget,
            extremes=self.extremes,
            contrast=None if self.dark is None else contrast(self.bench, self.extremes, self.dark),
            dark=self.dark,
            clock_offset=self.clock_offset(),
            chain=chain_values(self.bench),
            conditions=conditions(self.bench),
            recordings=[record.to_dict() for record in self.session],
            checks=checks,
            assumptions=assumptions(self.bench),
            cautions=cautions_of(self.bench, self.session, self.drift),
            reasons=[
                *reasons_of(self.scans, fits),
                *role_reasons(self.session, self.extremes, self.dark),
                *failed(checks),
            ],
        )
