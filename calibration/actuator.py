"""The actuator's response at a line: metres per volt, magnitude and phase, each with its budget."""

from collections.abc import Sequence
from dataclasses import replace
from math import inf, sqrt

import numpy as np
from numpy.typing import NDArray

from calibration import curvature
from calibration.actuator_entry import ActuatorEntry
from calibration.extremes import Extremes
from calibration.open_loop import OpenLoop
from calibration.readout import Readout
from calibration.slope_line import CombinedLine
from calibration.term import (
    LINE_FIT,
    PICKUP_ASSUMED,
    PICKUP_MEASURED,
    Term,
    budget_of,
)
from metro.bench import Bench
from metro.drive import terminal_factor
from metro.measured import Measured

__all__ = ["actuator_line"]

FloatArray = NDArray[np.float64]

LARGE_ADDITIVE = 0.3  # of the line: beyond, pick-up and motion are not told apart
ASSUMED_ADDITIVE = 0.01  # of the line, rectangular half-width, where nothing at all is known


def actuator_line(
    number: int,
    line: CombinedLine,
    extremes: Extremes,
    readout: Readout,
    drift: Term,
    *,
    drive_read: bool,
    dark_v: float = 0.0,
    loop: OpenLoop | None = None,
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
    dark_v : float
        Level without light [V].
    loop : OpenLoop, optional
        Of a servo that held the mirror; the drive was read before the point where it acts.

    Returns
    -------
    ActuatorEntry
        Magnitude and phase with their budgets.
    """
    bench = readout.bench
    frequency_hz = bench.lines[number].frequency_hz
    ratio = line.ratio * readout.correction(frequency_hz, recorded=drive_read)
    volts = terminal_factor(bench, recorded=drive_read)
    scale = 1.0 + bench.magnitude("adc.reference", 0.0) if drive_read else 1.0
    response = ratio * scale / readout.phase_per_metre / volts
    if loop is not None:
        response *= complex(loop.factor(frequency_hz)[0])
    terms = [
        *readout.ruler_terms(+1.0),
        *_extremes_terms(line, extremes),
        _drift_term(line, extremes, dark_v, drift),
        *_fit_terms(line),
        *readout.drive_terms(recorded=drive_read),
        *(readout.reference_term(+1.0) if drive_read else readout.drive_setting_term(number)),
        *curvature.line_terms(
            bench, extremes, line.cosines or (line.means.cos,), drive_read=drive_read
        ),
        *readout.response_terms(frequency_hz, recorded=drive_read),
        *_additive_terms(line, extremes, bench, frequency_hz, volts),
        *([] if loop is None else loop.terms(frequency_hz)),
    ]
    entry = _finished(frequency_hz, response, terms, line, extremes, drive_read=drive_read)
    ringing = [] if loop is None else loop.reasons(frequency_hz)
    return replace(entry, reasons=[*entry.reasons, *ringing])


def _finished(
    frequency_hz: float,
    response: complex,
    terms: Sequence[Term],
    line: CombinedLine,
    extremes: Extremes,
    *,
    drive_read: bool,
) -> ActuatorEntry:
    size, turn = budget_of(terms, abs(response), "m/V")
    magnitude = size.measured(abs(response))
    return ActuatorEntry(
        frequency=Measured.of(frequency_hz, "Hz"),
        magnitude=magnitude,
        phase=turn.measured(float(np.angle(response))) if drive_read else None,
        pickup=_pickup(line),
        budget=size,
        phase_budget=turn,
        reasons=_reasons(magnitude, line, extremes),
    )


def _reasons(magnitude: Measured, line: CombinedLine, extremes: Extremes) -> list[str]:
    """Return why a coefficient must not be trusted whatever its budget says."""
    reasons = []
    if magnitude.u_magnitude * magnitude.coverage_factor() > magnitude.magnitude:
        reasons.append("its expanded uncertainty is larger than its value")
    added = 0.0 if line.additive is None else abs(line.additive.ratio)
    share = added * line.means.inverse_sin / (extremes.swing_v * abs(line.ratio))
    if share > LARGE_ADDITIVE:
        reasons.append(
            f"what adds to the photodiode without motion is {100 * share:.3g} % of the line "
            f"(at most {100 * LARGE_ADDITIVE:g} %)"
        )
    return reasons


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
    return [extremes.term(extremes.u_of(swing, mid))]


def _drift_term(line: CombinedLine, extremes: Extremes, dark_v: float, drift: Term) -> Term:
    """Return the drift of the power: each recording has its own, scans and lines are averaged.

    Power moves swing and middle together: away from mid-fringe the working point seems to move too.
    """
    lean = (extremes.mid_v - dark_v) / extremes.swing_v
    moved = [means.inverse_sin2 + lean * means.cos_over_sin2 for means in line.records]
    own = [w * m for w, m in zip(line.weights, moved, strict=True)]
    if extremes.own and len(own) == extremes.scans:  # each recording's own power is in its extremes
        mean = sum(own) / len(own)
        return drift.with_relative(sqrt(sum((share - mean) ** 2 for share in own)))
    of_scans = sum(own) ** 2 / extremes.scans if extremes.scans else 0.0
    return drift.with_relative(sqrt(sum(share**2 for share in own) + of_scans))


def _fit_terms(line: CombinedLine) -> list[Term]:
    """Return the statistics of each record's line fit, along and across the response."""
    along = _along(line)
    across = np.array([-along[1], along[0]])
    terms = []
    for number, (covariance, dof) in enumerate(line.parts, start=1):
        size = _u_along(covariance, along) / abs(line.ratio)
        turn = _u_along(covariance, across) / abs(line.ratio)
        name = f"{LINE_FIT}, record {number}"
        terms.append(Term(name, None, "1", size, relative=1.0, kind="A", dof=dof))
        terms.append(Term(name, None, "rad", turn, turn=1.0, kind="A", dof=dof))
    return terms


def _additive_terms(
    line: CombinedLine, extremes: Extremes, bench: Bench, frequency_hz: float, volts: float
) -> list[Term]:
    """Return what adds without motion: its measurement, and what was not measured of it."""
    if line.both_slopes:
        return _residue_terms(line, extremes)
    weight = abs(line.additive_weight / line.ratio)
    lacks = frozenset({"wires", f"tilt {_moved_arm(bench)}"})
    terms = []
    if line.additive is not None:
        lacks &= line.additive.lacks
        along = _along(line)
        size = weight * _u_along(line.additive.covariance, along)
        turn = weight * _u_along(line.additive.covariance, np.array([-along[1], along[0]]))
        terms = _pair(PICKUP_MEASURED, size, turn, "A", line.additive.dof)
    return [
        *terms,
        *(_wires_terms(line, extremes, bench, frequency_hz, volts) if "wires" in lacks else []),
        *(_stated_tilt(line, extremes, bench, volts) if lacks - {"wires"} else []),
    ]


def _moved_arm(bench: Bench) -> str:
    return bench.text("actuator.arm") or "x"


def _residue_terms(line: CombinedLine, extremes: Extremes) -> list[Term]:
    """Return what the two slopes leave: their steepness is known as well as the fringe's middle."""
    added = 0.0 if line.additive is None else abs(line.additive.ratio)
    part = added * line.means.inverse_sin / (extremes.swing_v * abs(line.ratio))
    u = part * extremes.u_of(0.0, 1.0) / extremes.swing_v
    tilt = 2 * added / extremes.mid_v  # all that adds taken as tilt: an upper bound
    leaned = tilt / 2 * abs(line.tilt_weight / line.ratio) / sqrt(3.0)
    return [
        Term("pick-up", None, "1", u, relative=1.0, kind="A", dof=extremes.dof),
        Term("beam tilt", None, "1", leaned, relative=1.0, distribution="rectangular"),
    ]


def _wires_terms(
    line: CombinedLine, extremes: Extremes, bench: Bench, frequency_hz: float, volts: float
) -> list[Term]:
    """Return the pick-up of the wires where it was not measured: stated, or assumed."""
    if bench.get("drive.pickup") is None:
        u = ASSUMED_ADDITIVE / sqrt(3.0) * line.one_sided(extremes.swing_v)
        return _pair(PICKUP_ASSUMED, u, u, "B", inf)
    weight = abs(line.additive_weight / line.ratio)
    u = weight * bench.u("drive.pickup") * frequency_hz / 100.0 * volts
    return _pair("pick-up (not measured, stated)", u, u, "B", inf)


def _stated_tilt(line: CombinedLine, extremes: Extremes, bench: Bench, volts: float) -> list[Term]:
    """Return the tilt of the moved beam where it was not measured: stated, or assumed.

    Tilt adds to the light and changes the fringe's swing, in step with each other.
    """
    if bench.get("actuator.tilt") is None:
        u = ASSUMED_ADDITIVE / sqrt(3.0) * line.one_sided(extremes.swing_v)
        name = "beam tilt (not measured, assumed)"
        return [Term(name, None, "1", u, relative=1.0, distribution="rectangular")]
    side = -1.0 if line.additive_weight > 0 else 1.0  # the rising slope has a negative weight
    reach = abs(extremes.mid_v * abs(line.additive_weight) + side * line.tilt_weight) / 2
    u = bench.u("actuator.tilt") * volts * reach / abs(line.ratio)
    return [Term("beam tilt (not measured, stated)", None, "1", u, relative=1.0)]


def _along(line: CombinedLine) -> FloatArray:
    return np.array([line.ratio.real, line.ratio.imag]) / abs(line.ratio)


def _u_along(covariance: FloatArray, direction: FloatArray) -> float:
    return sqrt(max(0.0, float(direction @ covariance @ direction)))


def _pair(name: str, size: float, turn: float, kind: str, dof: float) -> list[Term]:
    return [
        Term(name, None, "1", size, relative=1.0, kind=kind, dof=dof),
        Term(name, None, "rad", turn, turn=1.0, kind=kind, dof=dof),
    ]
