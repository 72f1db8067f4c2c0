"""A drive series read from recordings: the nulls of a line and its metres per unit of drive."""

from collections.abc import Sequence
from dataclasses import dataclass, field
from typing import Any

import numpy as np

from calibration.bessel_nulls import DrivePoint, NullSeries, bessel_nulls
from calibration.errors import CalibrationError
from calibration.lines import fit_lines_si
from calibration.route import in_metres
from calibration.ruler import Ruler
from firmware_bridge.trace import Trace
from metro.measured import Measured
from metro.output import table

__all__ = ["NullReading", "null_tables", "read_nulls"]

_RANGE = "a series of drives over a null of J1 (3.83 rad, 7.02 rad …), harmonics 2 and 3 seen"


@dataclass(frozen=True)
class NullReading:
    """What a drive series says.

    Attributes
    ----------
    series : NullSeries
        Nulls and scale.
    drive_unit : str
        Unit of the drive.
    line_hz : float
        The line [Hz].
    ruler : Ruler or None
        Metres per radian.
    reasons : list of str
        Why it must not be trusted; empty where nothing was found.
    """

    series: NullSeries
    drive_unit: str
    line_hz: float
    ruler: Ruler | None
    reasons: list[str] = field(default_factory=list)

    def scale(self, found: Measured | None) -> tuple[Measured | None, Measured | None]:
        """Return radians and metres per unit of drive.

        Parameters
        ----------
        found : Measured or None
            Radians per unit of drive, unit "1".

        Returns
        -------
        tuple of (Measured or None, Measured or None)
            None where unknown.
        """
        if found is None:
            return None, None
        per = "" if self.drive_unit == "1" else f"/{self.drive_unit}"
        radians = Measured.of(found.magnitude, f"rad{per}", found.u_magnitude, found.dof)
        metres = in_metres([found], self.ruler)
        if metres is None:
            return radians, None
        one = metres[0]
        return radians, Measured.of(one.magnitude, f"m{per}", one.u_magnitude, one.dof)

    def to_dict(self) -> dict[str, Any]:
        """Return the JSON document.

        Returns
        -------
        dict
            Plain values and Measured; the keys of a single record are null.
        """
        radians, metres = self.scale(self.series.depth_per_drive)
        all_radians, all_metres = self.scale(self.series.from_all)
        return {
            **dict.fromkeys(("low", "high", "contrast", "slope", "slope_per_metre")),
            "working_phase": None,
            "phase_amplitude": [],
            "displacement_amplitude": None if self.ruler is None else [],
            "frequency": {"value": [self.line_hz], "unit": "Hz", "u": None},
            "nulls": [
                {
                    "number": null.number,
                    "drive": self._drive(null.drive),
                    "depth": {"value": null.depth_rad, "unit": "rad", "u": None},
                    "displacement": self._metres(null.depth_rad),
                }
                for null in self.series.nulls
            ],
            "phase_per_drive": radians,
            "displacement_per_drive": metres,
            "phase_per_drive_from_ratios": all_radians,
            "displacement_per_drive_from_ratios": all_metres,
            "routes": [
                {
                    "route": "Bessel nulls",
                    "displacement_amplitude": None,
                    "valid_range": _RANGE,
                    "reasons": self.reasons,
                }
            ],
            "agreement": None,
            "trustworthy": not self.reasons,
            "reasons": self.reasons,
        }

    def _metres(self, depth_rad: float) -> Measured | None:
        found = in_metres([Measured.of(depth_rad, "rad", 0.0)], self.ruler)
        return None if found is None else found[0]

    def _drive(self, drive: Measured) -> Measured:
        return Measured.of(drive.magnitude, self.drive_unit, drive.u_magnitude, drive.dof)


def _point(trace: Trace, drive: Trace, line_hz: float) -> DrivePoint:
    """Return harmonics and drive of one recording."""
    if 3.0 * line_hz > 0.45 * trace.rate_hz:
        raise CalibrationError(
            f"nulls need the third harmonic below 0.45 of the rate: {3 * line_hz:g} Hz at "
            f"{trace.rate_hz:g} Hz"
        )
    wanted = [line_hz, 2.0 * line_hz, 3.0 * line_hz]
    fit = fit_lines_si(
        trace.values, trace.rate_hz, wanted, start_index=trace.start_index, search_clock=False
    )
    driven = fit_lines_si(
        drive.values, drive.rate_hz, [line_hz], start_index=drive.start_index, search_clock=False
    ).lines[0]
    size = np.array([float(line.amplitude.magnitude) for line in fit.lines])
    phase = np.array([float(line.phase.magnitude) for line in fit.lines])
    u = np.array([max(float(line.amplitude.u_magnitude or 0.0), 1e-12) for line in fit.lines])
    return DrivePoint(
        float(driven.amplitude.magnitude),
        size * np.exp(1j * phase),
        u,
        float(driven.phase.magnitude),
    )


def read_nulls(
    recordings: Sequence[tuple[Trace, Trace]], line_hz: float, *, ruler: Ruler | None = None
) -> NullReading:
    """Find the nulls of a line in a series of recordings at different drives.

    Parameters
    ----------
    recordings : sequence of (Trace, Trace)
        Photodiode and drive monitor of each.
    line_hz : float
        The line [Hz].
    ruler : Ruler, optional
        Metres per radian.

    Returns
    -------
    NullReading
        Nulls and metres per unit of drive.

    Raises
    ------
    CalibrationError
        If there are fewer than four drives, or the third harmonic lies too high.
    """
    series = bessel_nulls([_point(trace, drive, line_hz) for trace, drive in recordings])
    return NullReading(series, recordings[0][1].unit, line_hz, ruler, list(series.reasons))


def null_tables(result: NullReading, remarks: Sequence[str] = ()) -> str:
    """Return the tables that people read.

    Parameters
    ----------
    result : NullReading
        What was read.
    remarks : sequence of str, optional
        Lines to add.

    Returns
    -------
    str
        Tables with empty lines between them.
    """
    document = result.to_dict()
    rows = [
        [
            str(null["number"]),
            null["drive"],
            f"{null['depth']['value']:.5f} rad",
            null["displacement"],
        ]
        for null in document["nulls"]
    ]
    scales = [
        ["from the nulls", document["phase_per_drive"], document["displacement_per_drive"]],
        [
            "from harmonics 1 and 3 of all",
            document["phase_per_drive_from_ratios"],
            document["displacement_per_drive_from_ratios"],
        ],
    ]
    parts = [table(rows, ["null", "drive", "depth", "displacement"])] if rows else []
    parts.append(table(scales, ["per drive", "phase", "displacement"]))
    sound = [] if result.reasons else ["no reason for distrust found"]
    return "\n\n".join([*parts, f"valid: {_RANGE}", *remarks, *sound])
