"""Recordings to metres: lines, fringes, calibrations and conversions.

Names load on first use (PEP 562).
"""

from importlib import import_module
from typing import TYPE_CHECKING, Any

if TYPE_CHECKING:
    from calibration.analysis import calibrate as calibrate
    from calibration.driven_fringe import fit_driven_fringe as fit_driven_fringe
    from calibration.errors import CalibrationError as CalibrationError
    from calibration.fringe_count import FringeCount as FringeCount
    from calibration.fringe_count import count_fringes as count_fringes
    from calibration.fringe_fit import FringeFit as FringeFit
    from calibration.line_fit import LineFit as LineFit
    from calibration.line_parts import accumulate_lines as accumulate_lines
    from calibration.line_parts import plan_lines as plan_lines
    from calibration.line_phasors import LinePhasors as LinePhasors
    from calibration.line_plan import LinePlan as LinePlan
    from calibration.lines import fit_lines as fit_lines
    from calibration.open_loop import OpenLoop as OpenLoop
    from calibration.open_loop import load_open_loop as load_open_loop
    from calibration.quadrature import QuadraturePhase as QuadraturePhase
    from calibration.quadrature import quadrature_phase as quadrature_phase
    from calibration.record import Calibration as Calibration
    from calibration.record import load as load
    from calibration.response import ActuatorResponse as ActuatorResponse
    from calibration.tracking import TrackedPhase as TrackedPhase
    from calibration.tracking import track_phase as track_phase

_HOMES = {
    "FringeCount": "calibration.fringe_count",
    "count_fringes": "calibration.fringe_count",
    "QuadraturePhase": "calibration.quadrature",
    "quadrature_phase": "calibration.quadrature",
    "TrackedPhase": "calibration.tracking",
    "track_phase": "calibration.tracking",
    "LinePhasors": "calibration.line_phasors",
    "LinePlan": "calibration.line_plan",
    "accumulate_lines": "calibration.line_parts",
    "plan_lines": "calibration.line_parts",
    "LineFit": "calibration.line_fit",
    "fit_lines": "calibration.lines",
    "load": "calibration.record",
    "ActuatorResponse": "calibration.response",
    "OpenLoop": "calibration.open_loop",
    "load_open_loop": "calibration.open_loop",
    "calibrate": "calibration.analysis",
    "Calibration": "calibration.record",
    "CalibrationError": "calibration.errors",
    "FringeFit": "calibration.fringe_fit",
    "fit_driven_fringe": "calibration.driven_fringe",
}

__all__ = [
    "ActuatorResponse",
    "Calibration",
    "CalibrationError",
    "FringeCount",
    "FringeFit",
    "LineFit",
    "LinePhasors",
    "LinePlan",
    "OpenLoop",
    "QuadraturePhase",
    "TrackedPhase",
    "accumulate_lines",
    "calibrate",
    "count_fringes",
    "fit_driven_fringe",
    "fit_lines",
    "load",
    "load_open_loop",
    "plan_lines",
    "quadrature_phase",
    "track_phase",
]


def __getattr__(name: str) -> Any:  # noqa: ANN401  # PEP 562: any public name of the package
    if name in _HOMES:
        return getattr(import_module(_HOMES[name]), name)
    raise AttributeError(f"module 'calibration' has no attribute {name!r}")


def __dir__() -> list[str]:
    return sorted(__all__)
