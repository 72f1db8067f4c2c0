"""A session's recordings and the bench file turned into a calibration.

Extremes from the scans; each lines recording inverted to optical phase on its slope and its lines
fitted there; both slopes put together; wavelength, index and drive turn radians per volt into
metres per volt. Every input leaves a row in the budget, every gap in the session a caution.
"""

from collections.abc import Sequence
from datetime import UTC, datetime
from functools import cached_property
from os import PathLike
from typing import Any

import numpy as np

from calibration.actuator import actuator_line
from calibration.actuator_entry import ActuatorEntry
from calibration.bench_check import check_bench
from calibration.contrast import contrast
from calibration.drive_series import DriveSeries
from calibration.line_covariance import line_covariance
from calibration.open_loop import OpenLoop
from calibration.readout import Readout
from calibration.readout_slope import readout_slope
from calibration.realignment import realignment_term
from calibration.record import Calibration
from calibration.response import ActuatorResponse
from calibration.response_fit import LINES_MIN, fit_response, response_cautions
from calibration.route_check import RouteCheck, compare_routes, route_term
from calibration.series_lines import SeriesRecord, series_of
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
from calibration.session_fits import SessionFits
from calibration.statements import assumptions, chain_values, conditions
from calibration.term import Term
from calibration.validity import validity_of
from metro.bench import Bench
from metro.drive import terminal_factor

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
    series: Paths = (),
    repeat: Sequence[Calibration] = (),
    open_loop: OpenLoop | None = None,
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
        Lines driven, on the two slopes; at least one of them.
    series : sequence of path
        Lines at several drives on either slope, in the order recorded: up, and down again.
    repeat : sequence of Calibration
        Of the same bench after other alignments: their scatter is the reproducibility.
    open_loop : OpenLoop, optional
        Of a servo that held the mirror, with the drive read before the point where it acts.
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
        "series": series,
    }
    analysis = _Analysis(
        bench,
        Session(files, bench),
        repeats=repeat,
        loop=open_loop,
        compares=compare,
        kept_in=kept_in,
    )
    return analysis.calibration()


class _Analysis(SessionFits):
    """The steps of one calibration; each is computed once, from those before it."""

    def __init__(
        self,
        bench: Bench,
        session: Session,
        *,
        repeats: Sequence[Calibration] = (),
        loop: OpenLoop | None = None,
        compares: bool = False,
        kept_in: str | PathLike[str] | None = None,
    ) -> None:
        super().__init__(bench, session)
        self.repeats, self.loop, self.compares = repeats, loop, compares
        self.readout, self.kept_in = Readout(bench), kept_in

    @cached_property
    def routes(self) -> list[RouteCheck] | None:
        """The slope against the driven fringe in the first lines recording; None if not asked for."""
        if not self.compares:
            return None
        first = self.slopes[0]
        trace = first.record.photodiode
        return compare_routes(
            trace.values, trace.rate_hz, first.fit, self.extremes, first.phase.slope
        )

    @cached_property
    def actuator(self) -> list[ActuatorEntry]:
        """Metres per volt at every line."""
        dark_v = 0.0 if self.dark is None else float(self.dark.magnitude)
        entries = [
            actuator_line(
                number,
                line,
                self.extremes,
                self.readout,
                self.drift,
                drive_read=self.drive_read,
                dark_v=dark_v,
                loop=self.loop,
            )
            for number, line in enumerate(self.combined)
        ]
        return [entry.with_terms(self._session_terms(entry)) for entry in entries]

    def _session_terms(self, entry: ActuatorEntry) -> list[Term]:
        """Return what one session by itself does not show: other alignments, other routes."""
        at_hz = float(entry.frequency.magnitude)
        return [
            realignment_term(self.bench, entry, self.repeats),
            route_term(self.routes, at_hz),
        ]

    @cached_property
    def series(self) -> list[DriveSeries | str]:
        """What the drive series says about each line; empty without one."""
        records = self.session.of("series")
        if not records:
            return []
        seen = [
            SeriesRecord.of(
                record, self.extremes, lambda r, phase, part: self.fit(r, phase, "rad", part)
            )
            for record in records
        ]
        volts = terminal_factor(self.bench, recorded=True)
        return series_of(seen, self.actuator, self.combined, self.extremes.swing_v, volts)

    @cached_property
    def response(self) -> ActuatorResponse | None:
        """The actuator between the lines; None where too few lines have a phase."""
        if not self.drive_read or len(self.actuator) < LINES_MIN:
            return None
        known = [(e.magnitude.magnitude, e.phase) for e in self.actuator if e.phase is not None]
        values = [size * np.exp(1j * phase.magnitude) for size, phase in known]
        covariance = line_covariance(self.actuator)
        return fit_response(np.array(self.frequencies_hz), np.array(values), covariance)

    def _cautions(self) -> list[str]:
        return [
            *cautions_of(self.bench, self.session, self.drift),
            *self._lean_cautions(),
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
        checks = self._checks()
        found = [series for series in self.series if isinstance(series, DriveSeries)]
        return Calibration(
            created=datetime.now(UTC).isoformat(timespec="seconds"),
            software=__version__,
            actuator=sign_reasons(self.bench, line_reasons(self.actuator, fits)),
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
            assumptions=assumptions(self.bench, self.repeats, self.loop, series=bool(found)),
            cautions=self._cautions(),
            reasons=[
                *reasons_of(self.scans, fits),
                *role_reasons(self.bench, self.session, self.extremes, self.dark),
                *failed(checks),
                *(reason for series in found for reason in series.reasons),
            ],
            line_covariance=line_covariance(self.actuator),
            response=self.response,
            drive_series=[series.to_dict() for series in found],
            validity=validity_of(self.bench, [(s.record, s.fit) for s in self.slopes]),
            open_loop=None if self.loop is None else self.loop.to_dict(),
        )
