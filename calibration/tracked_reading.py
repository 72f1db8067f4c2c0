"""A free-running recording read: its phase tracked by a pilot, lines fitted in phase, metres."""

from collections.abc import Sequence
from dataclasses import dataclass, field
from typing import TYPE_CHECKING, Any

import numpy as np

from calibration.found_extremes import Level
from calibration.free_record import FREE_RANGE, OWN_GAPS
from calibration.lines import fit_lines_si
from calibration.pilot_drive import driven_pilot
from calibration.route import in_metres
from calibration.ruler import Ruler
from calibration.tracking import TrackedPhase, track_phase
from firmware_bridge.trace import Trace
from metro.measured import Measured
from metro.output import table

if TYPE_CHECKING:
    from calibration.line_fit import LineFit

__all__ = ["TrackedReading", "read_tracked", "tracked_tables"]


@dataclass(frozen=True)
class TrackedReading:
    """What a free-running recording says.

    Attributes
    ----------
    tracked : TrackedPhase
        Phase and masks.
    lines : LineFit
        Lines fitted to the inverted samples.
    frequencies_hz : tuple of float
        Lines [Hz].
    low, high : Measured
        Extremes, in the record's unit.
    ruler : Ruler or None
        Metres per radian.
    reasons : list of str
        Why it must not be trusted; empty where nothing was found.
    """

    tracked: TrackedPhase
    lines: "LineFit"
    frequencies_hz: tuple[float, ...]
    low: Measured
    high: Measured
    ruler: Ruler | None
    reasons: list[str] = field(default_factory=list)

    @property
    def depths(self) -> list[Measured]:
        """Depth of each line [rad], the extremes' uncertainty in its u.

        A wrong span stretches the phase by up to its relative error at mid-fringe; averaged over whole
        fringes it is less, and not taken as less here.

        Returns
        -------
        list of Measured
            Depths [rad].
        """
        span = float(self.high.magnitude - self.low.magnitude)
        own = float(np.hypot(self.low.u_magnitude or 0.0, self.high.u_magnitude or 0.0)) / span
        return [
            Measured.of(
                float(line.amplitude.magnitude),
                "rad",
                float(np.hypot(line.amplitude.u_magnitude or 0.0, own * line.amplitude.magnitude)),
                line.amplitude.dof,
            )
            for line in self.lines.lines
        ]

    def to_dict(self) -> dict[str, Any]:
        """Return the JSON document.

        Returns
        -------
        dict
            With the keys that programs rely on.
        """
        tracked, metres = self.tracked, in_metres(self.depths, self.ruler)
        known = np.flatnonzero(tracked.known)
        course = tracked.phase_rad[known]
        pilot = tracked.pilot
        return {
            "low": self.low,
            "high": self.high,
            **dict.fromkeys(("contrast", "slope", "slope_per_metre")),
            "working_phase": None
            if not len(course)
            else Measured.of(float(course[0]), "rad", None),
            "phase_amplitude": self.depths,
            "displacement_amplitude": metres,
            "line_phase": [line.phase for line in self.lines.lines],
            "frequency": {"value": list(self.frequencies_hz), "unit": "Hz", "u": None},
            "pilot": None
            if pilot is None
            else {
                "frequency": {"value": pilot.frequency_hz, "unit": "Hz", "u": None},
                "depth": {"value": pilot.depth_rad, "unit": "rad", "u": None},
            },
            "phase_range": {
                "value": [float(course.min()), float(course.max())] if len(course) else None,
                "unit": "rad",
                "u": None,
            },
            "inverted_fraction": float(np.mean(tracked.inverted)),
            "known_fraction": float(np.mean(tracked.known)),
            "assumptions": tracked.assumptions,
            "routes": [
                {
                    "route": "tracked phase",
                    "displacement_amplitude": metres,
                    "phase_amplitude": self.depths,
                    "valid_range": FREE_RANGE,
                    "reasons": self.reasons,
                }
            ],
            "agreement": None,
            "trustworthy": not self.reasons,
            "reasons": self.reasons,
        }


def read_tracked(
    trace: Trace,
    pilot_hz: float,
    frequencies_hz: Sequence[float],
    low: Level,
    high: Level,
    *,
    drive: Trace | None = None,
    polarity: int = 1,
    ruler: Ruler | None = None,
) -> TrackedReading:
    """Track a free-running recording and fit lines in its phase.

    Parameters
    ----------
    trace : Trace
        Photodiode.
    pilot_hz : float
        Pilot line [Hz].
    frequencies_hz : sequence of float
        Lines [Hz]; the pilot itself where none is named.
    low, high : Level
        Extremes of the fringe.
    drive : Trace, optional
        What drives the pilot: sets the sign.
    polarity : int, optional
        1 where the drive moves the phase upwards, −1 where downwards.
    ruler : Ruler, optional
        Metres per radian.

    Returns
    -------
    TrackedReading
        Lines in phase and in metres.

    Raises
    ------
    CalibrationError
        If the extremes, the pilot or a line break a rule.
    """
    phase, seen_hz = None, pilot_hz
    if drive is not None:
        seen_hz, phase = driven_pilot(drive, pilot_hz)
        phase += np.pi if polarity < 0 else 0.0
        phase -= 2.0 * np.pi * seen_hz * drive.start_index / drive.rate_hz  # at t = 0
    tracked = track_phase(
        trace.values,
        trace.rate_hz,
        low.value,
        high.value,
        seen_hz,
        pilot_phase_rad=phase,
        start_index=trace.start_index,
        others_hz=[line_hz * seen_hz / pilot_hz for line_hz in frequencies_hz],
        in_board_time=drive is not None,
    )
    wanted = list(frequencies_hz) or [pilot_hz]
    lines = fit_lines_si(
        tracked.for_lines,
        trace.rate_hz,
        [line_hz * seen_hz / pilot_hz for line_hz in wanted],
        start_index=trace.start_index,
        value_unit="rad",
        search_clock=drive is None,  # else the drive has told it
    )
    return TrackedReading(
        tracked,
        lines,
        tuple(wanted),
        Measured.of(low.value, trace.unit, low.u),
        Measured.of(high.value, trace.unit, high.u),
        ruler,
        [*tracked.reasons, *(one for one in lines.reasons_by_line() if OWN_GAPS not in one)],
    )


def tracked_tables(result: TrackedReading, remarks: Sequence[str] = ()) -> str:
    """Return the tables that people read.

    Parameters
    ----------
    result : TrackedReading
        What was read.
    remarks : sequence of str, optional
        Lines to add.

    Returns
    -------
    str
        Tables with empty lines between them.
    """
    document = result.to_dict()
    pilot = document["pilot"]
    rows: list[list[Any]] = [["low", result.low], ["high", result.high]]
    if pilot is not None:
        depth = f"{pilot['depth']['value']:.4g} rad"
        rows.append(["pilot", f"{pilot['frequency']['value']:g} Hz, {depth}"])
    if document["phase_range"]["value"] is not None:
        least, most = document["phase_range"]["value"]
        rows.append(["phase", f"{least:.4g} rad to {most:.4g} rad"])
    rows.append(
        ["inverted", f"{document['inverted_fraction']:.1%} of the samples; lines from these"]
    )
    metres: list[Any] = document["displacement_amplitude"] or [
        "unknown: no --wavelength" for _ in result.depths
    ]
    lines = [
        [f"{hertz:g} Hz", depth, metre, line.phase]
        for hertz, depth, metre, line in zip(
            result.frequencies_hz, result.depths, metres, result.lines.lines, strict=True
        )
    ]
    parts = [
        table(rows),
        table(lines, ["line", "phase amplitude", "displacement", "phase at t = 0"]),
        "\n".join(f"assumed: {one}" for one in result.tracked.assumptions),
    ]
    sound = [] if result.reasons else ["no reason for distrust found"]
    return "\n\n".join([*parts, *remarks, *sound])
