"""The recordings of a drive series turned into points: each line's coefficient at its drive."""

from collections.abc import Callable, Sequence
from dataclasses import dataclass
from math import sqrt

import numpy as np
from numpy.typing import NDArray

from calibration.actuator_entry import ActuatorEntry
from calibration.drive_series import DriveSeries, SeriesPoint, fit_series
from calibration.errors import CalibrationError
from calibration.extremes import Extremes
from calibration.line_fit import Line, LineFit
from calibration.session import RoleRecord
from calibration.slope_line import CombinedLine, is_driven
from calibration.term import LINE_FIT
from calibration.working_point import SLOPE_SIGN, PhaseRecord, invert_fringe

__all__ = ["SeriesRecord", "series_of"]

FloatArray = NDArray[np.float64]
Fit = Callable[[RoleRecord, FloatArray, slice], LineFit]


@dataclass(frozen=True, eq=False)
class SeriesRecord:
    """One recording of a series, inverted as if on the rising slope, fitted whole and in halves."""

    record: RoleRecord
    phase: PhaseRecord
    whole: LineFit
    halves: tuple[LineFit, LineFit]

    @classmethod
    def of(cls, record: RoleRecord, extremes: Extremes, fit: Fit) -> "SeriesRecord":
        """Return a recording inverted and fitted.

        Parameters
        ----------
        record : RoleRecord
            With its drive channel.
        extremes : Extremes
            The fringe's extremes.
        fit : callable
            Fits lines to a stretch of a record's phase.

        Raises
        ------
        CalibrationError
            If the drive was not recorded.
        """
        if record.drive is None:
            raise CalibrationError(
                f"a drive series needs recordings with a drive channel, got one without: "
                f"{record.path}"
            )
        phase = invert_fringe(record.photodiode.values, extremes, "rising")
        count = phase.phase_rad.size
        whole, first, second = (
            fit(record, phase.phase_rad, slice(start, stop))
            for start, stop in ((0, count), (0, count // 2), (count // 2, count))
        )
        return cls(record, phase, whole, (first, second))

    def point(
        self, number: int, reference: CombinedLine, swing_v: float, metres: complex, volts: float
    ) -> SeriesPoint | None:
        """Return one line's coefficient; None where this recording does not drive it.

        Parameters
        ----------
        number : int
            The line.
        reference : CombinedLine
            The line as calibrated: tells the slope and what adds to the photodiode.
        swing_v : float
            Half of high − low.
        metres : complex
            Metres per volt at the terminals, per radian per volt read.
        volts : float
            Volts at the terminals per volt read.
        """
        line = self.whole.lines[number]
        if not is_driven(line) or line.ratio is None or line.drive is None:
            return None
        # on the falling slope the same motion turns the phase the other way
        side = 1.0 if (line.ratio.phasor / reference.ratio).real > 0 else -1.0
        slope = "rising" if side > 0 else "falling"
        added = 0.0 if reference.additive is None else reference.additive.ratio
        added *= -SLOPE_SIGN[slope] * self.phase.means.inverse_sin / swing_v
        u = abs(metres) * _u_of(line)
        parts = [half.lines[number] for half in self.halves]
        later, later_u = 0.0 + 0.0j, 0.0
        if all(part.ratio is not None and is_driven(part) for part in parts):
            early, late = (_ratio(part) for part in parts)
            later = side * metres * (late - early)
            later_u = abs(metres) * sqrt(sum(_u_of(part) ** 2 for part in parts))
        return SeriesPoint(
            drive_v=volts * abs(line.drive.phasor),
            coefficient=metres * (side * line.ratio.phasor - added),
            u=u,
            later=later,
            later_u=later_u,
        )


def series_of(
    records: Sequence[SeriesRecord],
    entries: Sequence[ActuatorEntry],
    references: Sequence[CombinedLine],
    swing_v: float,
    volts: float,
) -> list[DriveSeries | str]:
    """Return what a series says about each line, or why it says nothing.

    Parameters
    ----------
    records : sequence of SeriesRecord
        In the order recorded.
    entries : sequence of ActuatorEntry
        The calibrated lines.
    references : sequence of CombinedLine
        The same in radians per volt read.
    swing_v : float
        Half of high − low.
    volts : float
        Volts at the terminals per volt read.

    Returns
    -------
    list of DriveSeries or str
        One a line.
    """
    found = []
    for number, (entry, reference) in enumerate(zip(entries, references, strict=True)):
        phase_rad = 0.0 if entry.phase is None else float(entry.phase.magnitude)
        response = float(entry.magnitude.magnitude) * np.exp(1j * phase_rad)
        metres = complex(response / reference.ratio)
        points = [r.point(number, reference, swing_v, metres, volts) for r in records]
        there = [point for point in points if point is not None]
        at_hz = float(entry.frequency.magnitude)
        found.append(fit_series(at_hz, there, _common_u(entry)))
    return found


def _common_u(entry: ActuatorEntry) -> float:
    """Return the relative u that all points of a series share: all but the line fits."""
    effects = [c.effect for c in entry.budget.contributions if not c.name.startswith(LINE_FIT)]
    return sqrt(sum(effect**2 for effect in effects)) / float(entry.magnitude.magnitude)


def _ratio(line: Line) -> complex:
    assert line.ratio is not None  # noqa: S101  # asked before
    return line.ratio.phasor


def _u_of(line: Line) -> float:
    assert line.ratio is not None  # noqa: S101  # asked before
    return sqrt(float(np.trace(line.ratio.covariance)) / 2)
