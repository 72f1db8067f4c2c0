"""The errors of the calibration package."""

from metro.errors import MidfringeError

__all__ = ["CalibrationError"]


class CalibrationError(MidfringeError):
    """Base of the errors of ``calibration``: data or files that break a rule."""
