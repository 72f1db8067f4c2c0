"""A session's recordings fitted: extremes, dark level, and every line on every slope.

Each quantity is computed once, from those before it, when it is first asked for.
"""

from dataclasses import dataclass, replace
from functools import cached_property
from math import sqrt

import numpy as np
from numpy.typing import NDArray

from calibration.dark import dark_level
from calibration.errors import CalibrationError
from calibration.extremes import Extremes
from calibration.free_line import FreeLine, combine_free
from calibration.free_record import FreeRecord
from calibration.line_fit import LineFit
from calibration.lines import fit_lines_si
from calibration.mains import without_mains
from calibration.pickup import Additive, additive_of
from calibration.scan import ScanFit, fit_scan
from calibration.scan_tilt import Lean, level_scan
from calibration.session import RoleRecord, Session, has_extremes
from calibration.slope_line import CombinedLine, SlopeLine, combine, is_driven
from calibration.term import POWER_DRIFT, Term
from calibration.working_point import PhaseRecord, invert_fringe
from metro.bench import Bench
from metro.drive import peak_factor
from metro.measured import Measured

__all__ = ["FittedSlope", "SessionFits"]

FloatArray = NDArray[np.float64]

WHOLE = slice(None)
ASSUMED_DRIFT = 0.002  # relative change of high − low between recordings, where nothing is known


@dataclass(frozen=True)
class FittedSlope:
    """One lines recording inverted and fitted."""

    record: RoleRecord
    phase: PhaseRecord
    fit: LineFit


class SessionFits:
    """The recordings of a session, inverted and fitted.

    Parameters
    ----------
    bench : Bench
        The bench file.
    session : Session
        Its recordings by role.
    pilot_hz : float, optional
        The pilot of free-running recordings [Hz]; by default the highest line.
    """

    def __init__(self, bench: Bench, session: Session, pilot_hz: float | None = None) -> None:
        self.bench, self.session, self._pilot_hz = bench, session, pilot_hz
        self.frequencies_hz = [line.frequency_hz for line in bench.lines]

    @cached_property
    def scans(self) -> list[ScanFit]:
        """The fringe's extremes in each scan, mains and the drive's tilt taken out."""
        return [
            fit_scan(values, record.photodiode.rate_hz)
            for record, (values, _) in zip(self.session.of("scan"), self.levelled, strict=True)
        ]

    @cached_property
    def levelled(self) -> list[tuple[FloatArray, Lean | None]]:
        """Each scan without the mains, its fringe as it is at the drive of the lines."""
        mains_hz = self.bench.magnitude("mains.frequency", 50.0)
        out: list[tuple[FloatArray, Lean | None]] = []
        for record in self.session.of("scan"):
            trace, drive = record.photodiode, record.drive
            values = without_mains(trace.values, trace.rate_hz, mains_hz)
            if drive is None:
                out.append((values, None))
            else:
                out.append(level_scan(values, drive.values, self._lines_bias_v()))
        return out

    def _lines_bias_v(self) -> float:
        """Return the mean of the recorded drive of the lines [V], 0 where it is not recorded."""
        drives = [r.drive.values for r in self.session.driven if r.drive is not None]
        means = [float(np.nanmean(drive)) for drive in drives if np.isfinite(drive).any()]
        return float(np.mean(means)) if means else 0.0

    @cached_property
    def extremes(self) -> Extremes:
        """The mean extremes of the scans, else the bench file's, else the free recordings' own."""
        if self.scans:
            return Extremes.mean_of(self.scans)
        low, high = self.bench.get("fringe.low"), self.bench.get("fringe.high")
        if self.own_scans:
            return replace(Extremes.mean_of(self.own_scans), own=True)
        if low is None or high is None:
            raise CalibrationError(
                "a calibration needs the fringe's extremes: at least one --scan FILE, "
                "or both --low and --high, got neither"
            )
        u = [float(v.u_magnitude or 0.0) ** 2 for v in (low, high)]
        return Extremes(low.magnitude, high.magnitude, np.diag(u))

    @cached_property
    def own_scans(self) -> list[ScanFit]:
        """The extremes of free-running recordings, which pass whole fringes; empty beside a scan."""
        if self.scans or has_extremes(self.bench):
            return []
        mains_hz = self.bench.magnitude("mains.frequency", 50.0)
        traces = [record.photodiode for record in self.session.of("lines-free")]
        return [
            fit_scan(without_mains(trace.values, trace.rate_hz, mains_hz), trace.rate_hz)
            for trace in traces
        ]

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
    def slopes(self) -> list[FittedSlope]:
        """Every lines recording, inverted and fitted."""
        return [
            self._slope(record, slope)
            for slope in ("rising", "falling")
            for record in self.session.of(f"lines-{slope}")
        ]

    def _slope(self, record: RoleRecord, slope: str) -> FittedSlope:
        phase = invert_fringe(record.photodiode.values, self.extremes, slope)
        return FittedSlope(record, phase, self.fit(record, phase.phase_rad, "rad"))

    @cached_property
    def free(self) -> list[FreeRecord]:
        """Every free-running lines recording, tracked and fitted."""
        records = self.session.of("lines-free")
        pilot_hz = self._pilot_hz or max(self.frequencies_hz)
        return [
            FreeRecord.of(
                record,
                self.extremes,
                pilot_hz,
                self._motion_rad(pilot_hz),
                lambda r, phase: self.fit(r, phase, "rad"),
                self.frequencies_hz,
            )
            for record in records
        ]

    def _motion_rad(self, pilot_hz: float) -> float:
        """Return the phase of motion over drive at the pilot: as the slopes have it, else as declared."""
        if pilot_hz in self.frequencies_hz and self.slopes:
            ratio = self.combined[self.frequencies_hz.index(pilot_hz)].ratio
            return float(np.angle(ratio))
        declared = self.bench.magnitude("actuator.polarity", 1.0)
        declared *= -1.0 if self.bench.text("actuator.arm") == "y" else 1.0
        return 0.0 if declared > 0 else float(np.pi)

    def fit(
        self, record: RoleRecord, values: FloatArray, unit: str, part: slice = WHOLE
    ) -> LineFit:
        """Return the bench's lines fitted to values of a record, with its drive.

        Parameters
        ----------
        record : RoleRecord
            Gives rate and drive.
        values : ndarray, shape (n,)
            As long as the record.
        unit : str
            Of the values.
        part : slice
            The stretch of them to fit.

        Returns
        -------
        LineFit
            Phases from the recording's first sample.
        """
        return fit_lines_si(
            values[part],
            record.photodiode.rate_hz,
            self.frequencies_hz,
            None if record.drive is None else record.drive.values[part],
            start_index=part.start or 0,
            mains_hz=self.bench.magnitude("mains.frequency", 50.0),
            value_unit=unit,
            drive_unit="V",
        )

    @cached_property
    def blocked_fits(self) -> dict[str, list[LineFit]]:
        """Line fits in volts of the recordings without a fringe, by role."""
        return {
            role: [self.fit(r, r.photodiode.values, "V") for r in self.session.of(role)]
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

    def by_slope(self) -> list[tuple[float, list[SlopeLine]]]:
        """Return each line's recordings on one slope, with its frequency [Hz]."""
        return [
            (frequency_hz, records)
            for number, frequency_hz in enumerate(self.frequencies_hz)
            for records in self._slope_lines(number).values()
        ]

    @cached_property
    def combined(self) -> list[CombinedLine]:
        """Each line with both slopes put together, or as free-running recordings have it."""
        return [self._combined(number) for number in range(len(self.frequencies_hz))]

    def _combined(self, number: int) -> CombinedLine:
        parts = self._slope_lines(number)
        if not (parts["rising"] or parts["falling"]):
            if number in (free := {} if self.slopes else self.combined_free):
                return free[number]
            raise CalibrationError(
                f"the line at {self.frequencies_hz[number]:g} Hz is driven in no lines recording"
            )
        additive = self._additive(number)
        return combine(parts["rising"], parts["falling"], self.extremes.swing_v, additive)

    def _additive(self, number: int) -> Additive | None:
        """Return what adds to a line without motion, as recordings without a fringe tell."""
        blocked = {
            role: [fit.lines[number] for fit in fits if is_driven(fit.lines[number])]
            for role, fits in self.blocked_fits.items()
        }
        return additive_of(blocked["pickup"], blocked["blocked-x"], blocked["blocked-y"])

    @cached_property
    def combined_free(self) -> dict[int, CombinedLine]:
        """Each line that free-running recordings drive, by its place in the bench."""
        found = {k: self._free_lines(k) for k in range(len(self.frequencies_hz))}
        return {
            number: combine_free(parts, self.extremes.swing_v, self._additive(number))
            for number, parts in found.items()
            if parts
        }

    def _free_lines(self, number: int) -> list[FreeLine]:
        return [
            FreeLine(
                SlopeLine.of("both", line, free.means.means, self._setting_v(number)), free.means
            )
            for free in self.free
            if is_driven(line := free.fit.lines[number])
        ]

    def _setting_v(self, number: int) -> float | None:
        """Return the drive of a line as the bench file states it, zero to peak [V]."""
        stated = self.bench.lines[number].drive_v
        return None if stated is None else stated * peak_factor(self.bench)

    @cached_property
    def drive_read(self) -> bool:
        """Whether the drive was recorded beside the photodiode."""
        return self.session.driven[0].drive is not None

    def clock_offset(self) -> Measured | None:
        """Return the mean relative clock offset of the lines recordings, None if unknown."""
        fits = [slope.fit for slope in self.slopes] + [free.fit for free in self.free]
        found = [fit.clock_offset for fit in fits]
        known = [offset for offset in found if offset is not None and offset.u_magnitude]
        if not known:
            return None
        weights = np.array([1.0 / offset.u_magnitude**2 for offset in known])
        values = np.array([offset.magnitude for offset in known])
        mean, u = float(weights @ values / weights.sum()), float(weights.sum() ** -0.5)
        return Measured.of(mean, "1", u, sum(offset.dof for offset in known))
