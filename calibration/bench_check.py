"""What a bench file must say before a session can be calibrated."""

from calibration.errors import CalibrationError
from metro.bench import Bench

__all__ = ["check_bench"]

_UNCORRECTED = (
    "adc.quadratic",
    "adc.cubic",
    "drive.pickup",
    "actuator.tilt",
    "actuator.reproducibility",
    "fringe.drift",
)


def check_bench(bench: Bench) -> None:
    """Refuse a bench that lacks what a calibration cannot do without.

    Parameters
    ----------
    bench : Bench
        Wavelength with its source, air or vacuum, lines.

    Raises
    ------
    CalibrationError
        The first thing that is missing or cannot be corrected for.
    """
    _check_ruler(bench)
    if not bench.lines:
        raise CalibrationError("the bench must name at least one [[line]], got none")
    for key in _UNCORRECTED:
        value = bench.magnitude(key, 0.0)
        if value:
            raise CalibrationError(
                f"{key} must have the value 0 with its u, since a known one is not corrected for, "
                f"got {value:g}"
            )


def _check_ruler(bench: Bench) -> None:
    if bench.get("laser.wavelength") is None:
        raise CalibrationError(
            "laser.wavelength is the ruler and must be given, with its u and source, got none"
        )
    if bench.text("laser.source") is None:
        raise CalibrationError(
            "laser.source must say where the wavelength comes from "
            '(such as source = "wavemeter, 2026-03-01"), got none'
        )
    if bench.get("air.index") is None and bench.text("air.medium") is None:
        missing = [k for k in ("temperature", "pressure") if bench.get(f"air.{k}") is None]
        if missing:
            raise CalibrationError(
                f'[air] must hold temperature and pressure, or medium = "vacuum", got no '
                f"{' and no '.join(missing)}"
            )
