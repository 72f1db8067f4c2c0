"""A session's recordings and the bench file turned into a calibration.

Extremes from the scans; each lines recording inverted to optical phase on its slope and its lines
fitted there; both slopes put together; wavelength, index and drive turn radians per volt into
metres per volt. Every input leaves a row in the budget, every gap in the session a caution.
"""

from collections.abc import Sequence
from datetime import UTC, datetime
from os import PathLike
from typing import Any

from calibration.bench_check import check_bench
from calibration.contrast import contrast
from calibration.drive_series import DriveSeries
from calibration.line_covariance import line_covariance
from calibration.open_loop import OpenLoop
from calibration.readout_slope import readout_slope
from calibration.record import Calibration
from calibration.response_fit import response_cautions
from calibration.session import Session
from calibration.session_checks import (
    cautions_of,
    failed,
    line_reasons,
    reasons_of,
    repeat_checks,
    role_reasons,
    scan_checks,
    sign_reasons,
)
from calibration.session_entries import SessionEntries
from calibration.statements import assumptions, chain_values, conditions
from calibration.tracked_route import (
    TRACKED,
    free_line_cautions,
    tracked_route,
)
from calibration.validity import validity_of
from metro.bench import Bench

__all__ = ["calibrate"]

Paths = Sequence[str | PathLike[str]]


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
    lines_free: Paths = (),
    series: Paths = (),
    repeat: Sequence[Calibration] = (),
    open_loop: OpenLoop | None = None,
    pilot_hz: float | None = None,
    compare: bool = False,
    kept_in: str | PathLike[str] | None = None,
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
        Lines driven, on the two slopes.
    lines_free : sequence of path
        Lines driven while the bench runs freely through its fringes: a route of its own, and the
        only one without recordings on the slopes; at least one of the three.
    series : sequence of path
        Lines at several drives on either slope, in the order recorded: up, and down again.
    repeat : sequence of Calibration
        Of the same bench after other alignments: their scatter is the reproducibility.
    open_loop : OpenLoop, optional
        Of a servo that held the mirror, with the drive read before the point where it acts.
    pilot_hz : float, optional
        The line by which free-running recordings are tracked [Hz]; by default the highest.
    compare : bool
        Whether the driven fringe is fitted beside the slope, which takes seconds.
    kept_in : path, optional
        Folder of the calibration's file, from which it then keeps the recordings' paths.

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
        "lines-free": lines_free,
        "series": series,
    }
    analysis = _Analysis(
        bench,
        Session(files, bench),
        repeats=repeat,
        loop=open_loop,
        pilot_hz=pilot_hz,
        compares=compare,
        kept_in=kept_in,
    )
    return analysis.calibration()


class _Analysis(SessionEntries):
    """What the entries of one session make together."""

    def _cautions(self) -> list[str]:
        return [
            *cautions_of(self.bench, self.session, self.drift),
            *self._lean_cautions(),
            *self._free_cautions(),
            *response_cautions(self.response, len(self.actuator) if self.drive_read else 0),
            *(text for text in self.series if isinstance(text, str)),
            *([] if self.loop is None else self.loop.cautions),
        ]

    def _lean_cautions(self) -> list[str]:
        leans = [lean for _, lean in self.levelled if lean is not None]
        if not leans:
            return []
        swing_v = 2 * self.extremes.swing_v
        share = max(max(abs(k.high_slope), abs(k.low_slope)) for k in leans) / swing_v
        return [
            (
                f"the fringe leans with the drive in {len(leans)} of {len(self.levelled)} scans, up to "
                f"{100 * share:.2g} % of high − low a volt of its reading: the actuator tilts its "
                "mirror; the extremes are those at the drive of the lines"
            )
        ]

    def _free_cautions(self) -> list[str]:
        if self.slopes:
            return []
        return free_line_cautions(self.combined, self.extremes.swing_v)

    def _checks(self) -> list[dict[str, Any]]:
        return [
            *scan_checks(self.scans, self.drift),
            *repeat_checks(self.by_slope(), self.drift),
            *(check.to_dict() for check in self.routes or ()),
        ]

    def calibration(self) -> Calibration:
        """Return everything together."""
        from metro import __version__

        slope, budget = readout_slope(self.readout, self.extremes, self.drift)
        fits = [(s.record.path, s.phase, s.fit) for s in self.slopes]
        entries = line_reasons(self.actuator, fits)
        if not self.slopes:
            entries = [self.with_free_reasons(k, entry) for k, entry in enumerate(entries)]
        driven = [(s.record, s.fit) for s in self.slopes] + [(f.record, f.fit) for f in self.free]
        free = [
            *(f"extremes: {reason}" for scan in self.own_scans for reason in scan.reasons),
            *(reason for record in self.free for reason in record.reasons),
        ]
        checks = self._checks()
        found = [series for series in self.series if isinstance(series, DriveSeries)]
        return Calibration(
            created=datetime.now(UTC).isoformat(timespec="seconds"),
            software=__version__,
            actuator=sign_reasons(self.bench, entries),
            readout_slope=slope,
            readout_budget=budget,
            extremes=self.extremes,
            contrast=None if self.dark is None else contrast(self.bench, self.extremes, self.dark),
            dark=self.dark,
            clock_offset=self.clock_offset(),
            chain=chain_values(self.bench),
            conditions=conditions(self.bench),
            recordings=[record.to_dict(self.kept_in) for record in self.session],
            checks=checks,
            assumptions=[
                *assumptions(self.bench, self.repeats, self.loop, series=bool(found)),
                *self._free_assumptions(),
            ],
            cautions=self._cautions(),
            reasons=[
                *reasons_of(self.scans, fits),
                *free,
                *role_reasons(self.bench, self.session, self.extremes, self.dark),
                *failed(checks),
                *(reason for series in found for reason in series.reasons),
            ],
            line_covariance=line_covariance(self.actuator),
            response=self.response,
            drive_series=[series.to_dict() for series in found],
            validity=validity_of(self.bench, driven),
            open_loop=None if self.loop is None else self.loop.to_dict(),
            routes=self._routes_kept(),
        )

    def _free_assumptions(self) -> list[str]:
        said = [text for free in self.free for text in free.tracked.assumptions]
        return [f"{TRACKED}: {text}" for text in dict.fromkeys(said)]

    def _routes_kept(self) -> list[dict[str, Any]]:
        if not self.free:
            return []
        return [tracked_route(self.free, self.free_entries, decides=not self.slopes)]
