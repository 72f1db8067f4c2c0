"""A recording with two detectors in quadrature, read: fringes, lines and their metres."""

import math
from collections.abc import Sequence
from dataclasses import dataclass, field
from typing import TYPE_CHECKING, Any

import numpy as np

from calibration.fringe_pass import Pass
from calibration.lines import fit_lines_si
from calibration.quadrature import QuadraturePhase, quadrature_phase
from calibration.route import in_metres
from calibration.ruler import Ruler
from calibration.turning_points import turning_points
from firmware_bridge.trace import Trace
from metro.measured import Measured
from metro.output import table

if TYPE_CHECKING:
    from calibration.line_fit import LineFit

__all__ = ["QuadratureReading", "quadrature_tables", "read_quadrature"]

_TWO_PI = 2.0 * math.pi
_RANGE = "any depth, at most π of phase per sample"


@dataclass(frozen=True)
class QuadratureReading:
    """What two detectors in quadrature say.

    Attributes
    ----------
    phase : QuadraturePhase
        Phase and ellipse.
    passes : list of Pass
        Stretches in which the phase went one way by more than half a fringe.
    frequencies_hz : tuple of float
        Lines [Hz].
    lines : LineFit or None
        Lines fitted in the phase; None without any.
    ruler : Ruler or None
        Metres per radian.
    trace : Trace
        The first detector.
    reasons : list of str
        Why it must not be trusted; empty where nothing was found.
    """

    phase: QuadraturePhase
    passes: list[Pass]
    frequencies_hz: tuple[float, ...]
    lines: "LineFit | None"
    ruler: Ruler | None
    trace: Trace
    reasons: list[str] = field(default_factory=list)

    @property
    def fringes(self) -> Measured:
        """Fringes of all passes together.

        Returns
        -------
        Measured
            Dimensionless.
        """
        u = math.sqrt(math.fsum(one.fringes_u**2 for one in self.passes))
        return Measured.of(math.fsum(one.fringes for one in self.passes), "1", u)

    @property
    def depths(self) -> list[Measured]:
        """Depth of each line, the periodic error in its u.

        Returns
        -------
        list of Measured
            Depths [rad]; empty without lines.
        """
        if self.lines is None:
            return []
        left = math.hypot(self.phase.periodic_error_rad, self.phase.periodic_error_u_rad)
        return [
            Measured.of(
                float(line.amplitude.magnitude),
                "rad",
                math.hypot(float(line.amplitude.u_magnitude or 0.0), left / math.sqrt(2.0)),
                line.amplitude.dof,
            )
            for line in self.lines.lines
        ]

    def metres(self, phase_rad: float, u_rad: float) -> Measured | None:
        """Return a phase in metres.

        Parameters
        ----------
        phase_rad, u_rad : float
            Phase and its standard uncertainty [rad].

        Returns
        -------
        Measured or None
            None without a wavelength.
        """
        found = in_metres([Measured.of(phase_rad, "rad", u_rad)], self.ruler)
        return None if found is None else found[0]

    def ellipse_dict(self) -> dict[str, Any]:
        """Return the JSON form of the ellipse and what it leaves.

        Returns
        -------
        dict
            Plain values and Measured.
        """
        phase, ellipse = self.phase, self.phase.ellipse
        u = np.sqrt(np.diag(ellipse.covariance)).tolist()
        unit = self.trace.unit
        units = (unit, unit, "1", "rad", unit)
        names = ("offset_x", "offset_y", "gain_ratio", "angle", "radius")
        out: dict[str, Any] = {
            name: Measured.of(value, own, u_one)
            for name, value, own, u_one in zip(
                names, ellipse.parameters.tolist(), units, u, strict=True
            )
        }
        left, left_u = phase.periodic_error_rad, phase.periodic_error_u_rad
        out["covariance"] = ellipse.covariance.tolist()
        out["periodic_error"] = Measured.of(left, "rad", left_u)
        out["periodic_error_displacement"] = self.metres(left, left_u)
        out["uncorrected_error"] = Measured.of(phase.uncorrected_error_rad, "rad", None)
        out["largest_step"] = {"value": phase.largest_step_rad, "unit": "rad", "u": None}
        out["ambiguity_limit"] = {"value": math.pi, "unit": "rad", "u": None}
        return out

    def to_dict(self) -> dict[str, Any]:
        """Return the JSON document.

        Returns
        -------
        dict
            With the keys that programs rely on; extremes, slope and contrast do not apply.
        """
        depths, fringes = self.depths, self.fringes
        rate, first = self.trace.rate_hz, self.trace.start_index
        metres = in_metres(depths, self.ruler)
        return {
            **dict.fromkeys(("low", "high", "contrast", "slope", "slope_per_metre")),
            "working_phase": Measured.of(
                float(np.nanmean(self.phase.phase_rad[:1])) if len(self.phase.phase_rad) else 0.0,
                "rad",
                self.phase.phase_u_rad,
            ),
            "phase_amplitude": depths,
            "displacement_amplitude": metres,
            "line_phase": [] if self.lines is None else [line.phase for line in self.lines.lines],
            "frequency": {"value": list(self.frequencies_hz), "unit": "Hz", "u": None},
            "fringes": fringes,
            "displacement": self.metres(
                float(fringes.magnitude) * _TWO_PI, float(fringes.u_magnitude) * _TWO_PI
            ),
            "direction": "from the quadrature: up is from the first detector to the second",
            "passes": [
                {
                    "start": {"value": (first + one.start_index) / rate, "unit": "s", "u": None},
                    "end": {"value": (first + one.stop_index) / rate, "unit": "s", "u": None},
                    "fringes": Measured.of(one.fringes, "1", one.fringes_u),
                    "displacement": self.metres(one.fringes * _TWO_PI, one.fringes_u * _TWO_PI),
                    "direction": "up" if one.direction > 0 else "down",
                }
                for one in self.passes
            ],
            "quadrature": self.ellipse_dict(),
            "routes": [
                {
                    "route": "quadrature",
                    "displacement_amplitude": metres,
                    "phase_amplitude": depths,
                    "valid_range": _RANGE,
                    "reasons": self.reasons,
                }
            ],
            "agreement": None,
            "trustworthy": not self.reasons,
            "reasons": self.reasons,
        }


def _passes(found: QuadraturePhase) -> list[Pass]:
    good = np.flatnonzero(np.isfinite(found.phase_rad))
    phase = found.phase_rad[good]
    ends = np.concatenate([[0], turning_points(phase, math.pi), [len(phase) - 1]])
    u = math.hypot(found.phase_u_rad, found.periodic_error_rad, found.periodic_error_u_rad)
    out = []
    for start, stop in zip(ends[:-1].tolist(), ends[1:].tolist(), strict=True):
        way = float(phase[stop] - phase[start])
        fastest = float(np.abs(np.diff(phase[start : stop + 1])).max()) / _TWO_PI
        out.append(
            Pass(
                int(good[start]),
                int(good[stop]),
                abs(way) / _TWO_PI,
                math.sqrt(2.0) * u / _TWO_PI,
                1 if way >= 0.0 else -1,
                fastest,
            )
        )
    return out


def read_quadrature(
    x: Trace, y: Trace, frequencies_hz: Sequence[float] = (), *, ruler: Ruler | None = None
) -> QuadratureReading:
    """Read a recording with two detectors in quadrature.

    Parameters
    ----------
    x, y : Trace
        The detectors over the same stretch.
    frequencies_hz : sequence of float, optional
        Lines [Hz], fitted in the phase (sine approximation, ISO 16063-11, method 3).
    ruler : Ruler, optional
        Metres per radian.

    Returns
    -------
    QuadratureReading
        Fringes, lines and the periodic error left.

    Raises
    ------
    CalibrationError
        If the signals lie on no ellipse, or a line breaks a rule.
    """
    phase = quadrature_phase(x.values, y.values)
    lines = None
    reasons = list(phase.reasons)
    if frequencies_hz:
        lines = fit_lines_si(
            phase.phase_rad,
            x.rate_hz,
            frequencies_hz,
            start_index=x.start_index,
            value_unit="rad",
        )
        reasons += lines.reasons_by_line()
    return QuadratureReading(phase, _passes(phase), tuple(frequencies_hz), lines, ruler, x, reasons)


def _uncorrected(phase: QuadraturePhase) -> str:
    if phase.uncorrected_error_rad > 3.0:
        return "no phase: the ellipse does not go round zero"
    return f"{phase.uncorrected_error_rad:.3g} rad"


def quadrature_tables(result: QuadratureReading, remarks: Sequence[str] = ()) -> str:
    """Return the tables that people read.

    Parameters
    ----------
    result : QuadratureReading
        What was read.
    remarks : sequence of str, optional
        Lines to add.

    Returns
    -------
    str
        Tables with empty lines between them.
    """
    shape = result.ellipse_dict()
    metres = shape["periodic_error_displacement"]
    words = {
        "offset_x": "of the first signal",
        "offset_y": "of the second",
        "gain_ratio": "first over second",
        "angle": "departure from quadrature",
        "radius": "amplitude of the fringe",
    }
    rows: list[list[Any]] = [
        [name.replace("_", " "), shape[name], text] for name, text in words.items()
    ]
    rows += [
        ["periodic error", shape["periodic_error"], "left after the correction"],
        ["", metres or "unknown: no --wavelength", "the same in metres"],
        ["uncorrected", _uncorrected(result.phase), "peak, without it"],
        ["largest step", f"{result.phase.largest_step_rad:.3g} rad", "a sample; π is the limit"],
        ["fringes", result.fringes, "of all passes together"],
    ]
    parts = [table(rows)]
    if result.depths:
        known = in_metres(result.depths, result.ruler)
        none = "unknown: no --wavelength"
        found: list[Any] = [none] * len(result.depths) if known is None else list(known)
        parts.append(
            table(
                [
                    [f"{hertz:g} Hz", depth, metre]
                    for hertz, depth, metre in zip(
                        result.frequencies_hz, result.depths, found, strict=True
                    )
                ],
                ["line", "phase amplitude", "displacement"],
            )
        )
    sound = [] if result.reasons else ["no reason for distrust found"]
    return "\n\n".join([*parts, *remarks, *sound])
