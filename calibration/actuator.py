"""The actuator's response at a line: metres per volt, magnitude and phase, each with its budget."""

from collections.abc import Sequence
from math import hypot, inf, sqrt

import numpy as np

from calibration import curvature
from calibration.extremes import Extremes
from calibration.readout import Readout
from calibration.record import ActuatorEntry
from calibration.slope_line import CombinedLine
from calibration.term import Term, budget_of
from metro.bench import Bench
from metro.drive import terminal_factor
from metro.measured import Measured

__all__ = ["actuator_line"]

ASSUMED_ADDITIVE = 0.01  # of the line, rectangular half-width, where nothing at all is known


def actuator_line(
    number: int,
    line: CombinedLine,
    extremes: Extremes,
    readout: Readout,
    drift: Term,
    *,
    drive_read: bool,
) -> ActuatorEntry:
    """Return metres per volt at one line.

    Parameters
    ----------
    number : int
        Place of the line in the bench, from 0.
    line : CombinedLine
        Optical phase per volt of the drive's reading.
    extremes : Extremes
        The fringe's extremes.
    readout : Readout
        Light and electronics of the bench.
    drift : Term
        Change of high − low between scans and lines, per single recording (relative).
    drive_read : bool
        Whether the drive was read by the recording's own converter.

    Returns
    -------
    ActuatorEntry
        Magnitude and phase with their budgets.
    """
    bench = readout.bench
    frequency_hz = bench.lines[number].frequency_hz
    ratio = line.ratio * readout.correction(frequency_hz, recorded=drive_read)
    volts = terminal_factor(bench, recorded=drive_read)
    response = ratio / readout.phase_per_metre / volts
    terms = [
        *readout.ruler_terms(+1.0),
        *_extremes_terms(line, extremes),
        _drift_term(line, extremes, drift),
        *_fit_terms(line),
        *readout.drive_terms(recorded=drive_read),
        *(readout.reference_term(+1.0) if drive_read else readout.drive_setting_term(number)),
        *curvature.line_terms(bench, extremes, line.means.cos, drive_read=drive_read),
        *readout.response_terms(frequency_hz, recorded=drive_read),
        *_additive_terms(line, extremes, bench, frequency_hz, volts),
        *_tilt_terms(line, extremes, bench, volts),
    ]
    return _finished(frequency_hz, response, terms, line, drive_read=drive_read)


def _finished(
    frequency_hz: float,
    response: complex,
    terms: Sequence[Term],
    line: CombinedLine,
    *,
    drive_read: bool,
) -> ActuatorEntry:
    size, turn = budget_of(terms, abs(response), "m/V")
    return ActuatorEntry(
        frequency=Measured.of(frequency_hz, "Hz"),
        magnitude=size.measured(abs(response)),
        phase=turn.measured(float(np.angle(response))) if drive_read else None,
        pickup=_pickup(line),
        budget=size,
        phase_budget=turn,
    )


def _pickup(line: CombinedLine) -> Measured | None:
    """Return the size of what adds without motion, volts per volt of the drive's reading."""
    if line.additive is None:
        return None
    u = sqrt(float(np.trace(line.additive.covariance)) / 2)
    return Measured.of(abs(line.additive.ratio), "1", u, line.additive.dof)


def _extremes_terms(line: CombinedLine, extremes: Extremes) -> list[Term]:
    """Return what an error of the extremes does to a line read between them."""
    swing = line.means.inverse_sin2 / extremes.swing_v
    mid = line.means.cos_over_sin2 / extremes.swing_v
    u = extremes.u_of(swing, mid)
    return [Term("fringe extremes", None, "1", u, relative=1.0, kind="A", dof=extremes.dof)]


def _drift_term(line: CombinedLine, extremes: Extremes, drift: Term) -> Term:
    """Return the drift of high − low: each recording has its own, scans and lines are averaged."""
    scans = 1.0 / extremes.scans if extremes.scans else 0.0
    share = sqrt(sum(w**2 for w in line.weights) + scans)
    return drift.with_relative(share)


def _fit_terms(line: CombinedLine) -> list[Term]:
    """Return the statistics of each record's line fit, along and across the response."""
    along = np.array([line.ratio.real, line.ratio.imag]) / abs(line.ratio)
    across = np.array([-along[1], along[0]])
    terms = []
    for number, (covariance, dof) in enumerate(line.parts, start=1):
        size = sqrt(max(0.0, float(along @ covariance @ along))) / abs(line.ratio)
        turn = sqrt(max(0.0, float(across @ covariance @ across))) / abs(line.ratio)
        name = f"line fit, record {number}"
        terms.append(Term(name, None, "1", size, relative=1.0, kind="A", dof=dof))
        terms.append(Term(name, None, "rad", turn, turn=1.0, kind="A", dof=dof))
    return terms


def _additive_terms(
    line: CombinedLine, extremes: Extremes, bench: Bench, frequency_hz: float, volts: float
) -> list[Term]:
    """Return what pick-up leaves in the line: its measurement, its statement or an assumption."""
    if line.both_slopes:
        residue = 0.0 if line.additive is None else abs(line.additive.ratio)
        part = residue * line.means.inverse_sin / (extremes.swing_v * abs(line.ratio))
        u = part * extremes.u_of(1.0, 0.0) / extremes.swing_v
        return [_pair("pick-up", u, u, "A", extremes.dof)[0]]
    weight = abs(line.additive_weight / line.ratio)
    if line.additive is not None:
        along = line.ratio / abs(line.ratio)
        unit = np.array([along.real, along.imag])
        across = np.array([-unit[1], unit[0]])
        covariance = line.additive.covariance
        size = weight * sqrt(float(unit @ covariance @ unit))
        turn = weight * sqrt(float(across @ covariance @ across))
        return _pair("pick-up", size, turn, "A", line.additive.dof)
    stated = _stated_additive(bench, extremes, frequency_hz, volts)
    if stated is None:
        u = ASSUMED_ADDITIVE / sqrt(3.0)
        return _pair("pick-up (not measured, assumed)", u, u, "B", inf)
    return _pair("pick-up (not measured, stated)", weight * stated, weight * stated, "B", inf)


def _stated_additive(
    bench: Bench, extremes: Extremes, frequency_hz: float, volts: float
) -> float | None:
    """Return the stated size of what adds without motion [V per V read], None if not stated."""
    stated = [bench.get("drive.pickup"), bench.get("actuator.tilt")]
    if all(entry is None for entry in stated):
        return None
    wires = bench.u("drive.pickup") * frequency_hz / 100.0
    tilt = bench.u("actuator.tilt") * extremes.mid_v / 2
    return hypot(wires, tilt) * volts


def _tilt_terms(line: CombinedLine, extremes: Extremes, bench: Bench, volts: float) -> list[Term]:
    """Return what tilt leaves away from mid-fringe: it modulates the fringe's swing."""
    if line.additive is None:
        tilt = bench.u("actuator.tilt") * volts
    else:  # all that adds without motion taken as tilt: an upper bound
        tilt = 2 * abs(line.additive.ratio) / extremes.mid_v
    u = tilt / 2 * abs(line.means.cot) / abs(line.ratio) / sqrt(3.0)
    return [Term("beam tilt", None, "1", u, relative=1.0, distribution="rectangular")]


def _pair(name: str, size: float, turn: float, kind: str, dof: float) -> list[Term]:
    return [
        Term(name, None, "1", size, relative=1.0, kind=kind, dof=dof),
        Term(name, None, "rad", turn, turn=1.0, kind=kind, dof=dof),
    ]
