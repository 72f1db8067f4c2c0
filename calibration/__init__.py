"""Recordings to metres: lines, fringes, calibrations and conversions.

Names load on first use (PEP 562).
"""

from importlib import import_module
from typing import TYPE_CHECKING, Any

if TYPE_CHECKING:
    from calibration.errors import CalibrationError as CalibrationError

_HOMES = {
    "CalibrationError": "calibration.errors",
}

__all__ = ["CalibrationError"]


def __getattr__(name: str) -> Any:  # noqa: ANN401  # PEP 562: any public name of the package
    if name in _HOMES:
        return getattr(import_module(_HOMES[name]), name)
    raise AttributeError(f"module 'calibration' has no attribute {name!r}")


def __dir__() -> list[str]:
    return sorted(__all__)
