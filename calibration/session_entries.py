"""Metres per volt at every line of a session, by every route that its recordings allow."""

from collections.abc import Sequence
from dataclasses import replace
from functools import cached_property
from os import PathLike

import numpy as np

from calibration.actuator import actuator_line
from calibration.actuator_entry import ActuatorEntry
from calibration.drive_series import DriveSeries
from calibration.line_covariance import line_covariance
from calibration.open_loop import OpenLoop
from calibration.readout import Readout
from calibration.realignment import realignment_term
from calibration.record import Calibration
from calibration.response import ActuatorResponse
from calibration.response_fit import LINES_MIN, fit_response
from calibration.route_check import RouteCheck, compare_routes, route_term
from calibration.series_lines import SeriesRecord, series_of
from calibration.session import Session
from calibration.session_fits import SessionFits
from calibration.slope_line import CombinedLine
from calibration.term import Term
from calibration.tracked_route import TRACKED, tracked_checks
from metro.bench import Bench
from metro.drive import terminal_factor

__all__ = ["SessionEntries"]


class SessionEntries(SessionFits):
    """The actuator at every line, each step computed once, from those before it.

    Parameters
    ----------
    bench : Bench
        The bench file.
    session : Session
        Its recordings by role.
    repeats : sequence of Calibration
        Of other alignments.
    loop : OpenLoop, optional
        Of a servo that held the mirror.
    pilot_hz : float, optional
        The pilot of free-running recordings [Hz].
    compares : bool
        Whether the driven fringe is fitted beside.
    kept_in : path, optional
        Folder of the calibration's file.
    """

    def __init__(
        self,
        bench: Bench,
        session: Session,
        *,
        repeats: Sequence[Calibration] = (),
        loop: OpenLoop | None = None,
        pilot_hz: float | None = None,
        compares: bool = False,
        kept_in: str | PathLike[str] | None = None,
    ) -> None:
        super().__init__(bench, session, pilot_hz)
        self.repeats, self.loop, self.compares = repeats, loop, compares
        self.readout, self.kept_in = Readout(bench), kept_in

    @cached_property
    def routes(self) -> list[RouteCheck] | None:
        """The routes beside each other; None where only one was taken.

        The driven fringe in the first lines recording, and the slopes beside free-running recordings.
        """
        tracked = self._tracked_checks()
        if not self.compares:
            return tracked or None
        if self.slopes:
            slope = self.slopes[0]
            record, fit, phase, name = slope.record, slope.fit, slope.phase.phase_rad, "slope"
        else:
            free = self.free[0]
            record, fit, phase, name = free.record, free.fit, free.tracked.for_lines, TRACKED
        trace = record.photodiode
        return [
            *compare_routes(trace.values, trace.rate_hz, fit, self.extremes, phase, name),
            *tracked,
        ]

    def _tracked_checks(self) -> list[RouteCheck]:
        if not self.slopes:
            return []
        numbers = list(self.combined_free)
        lines = [(self.combined[k], self.combined_free[k]) for k in numbers]
        slopes = [self._entries[k] for k in numbers]
        return tracked_checks(slopes, self.free_entries, lines, self.extremes)

    @cached_property
    def actuator(self) -> list[ActuatorEntry]:
        """Metres per volt at every line."""
        return [entry.with_terms(self._session_terms(entry)) for entry in self._entries]

    @cached_property
    def _entries(self) -> list[ActuatorEntry]:
        """Metres per volt before what one session by itself does not show."""
        return [self._entry(number, line) for number, line in enumerate(self.combined)]

    @cached_property
    def free_entries(self) -> list[ActuatorEntry]:
        """Metres per volt by free-running recordings, one a line of theirs."""
        return [
            self.with_free_reasons(number, self._entry(number, line))
            for number, line in self.combined_free.items()
        ]

    def _entry(self, number: int, line: CombinedLine) -> ActuatorEntry:
        return actuator_line(
            number,
            line,
            self.extremes,
            self.readout,
            self.drift,
            drive_read=self.drive_read,
            dark_v=0.0 if self.dark is None else float(self.dark.magnitude),
            loop=self.loop,
        )

    def with_free_reasons(self, number: int, entry: ActuatorEntry) -> ActuatorEntry:
        """Return a line's entry with what its free-running recordings say against it.

        Parameters
        ----------
        number : int
            Place of the line in the bench, from 0.
        entry : ActuatorEntry
            The line.

        Returns
        -------
        ActuatorEntry
            Reasons name their recording.
        """
        said = [reason for free in self.free for reason in free.line_reasons(number)]
        return replace(entry, reasons=[*entry.reasons, *dict.fromkeys(said)])

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
