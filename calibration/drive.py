"""How the drive's reading becomes volts at the actuator's terminals."""

from math import sqrt

import numpy as np

from calibration.line_fit import Line
from metro.bench import Bench

__all__ = ["is_driven", "peak_factor", "terminal_factor"]

DRIVEN_MIN = 10.0  # amplitude over u below which the drive does not hold the line at all

_PEAK: dict[str, float] = {"peak": 1.0, "peak-to-peak": 0.5, "rms": 2.0**0.5}


def terminal_factor(bench: Bench, *, recorded: bool) -> float:
    """Return volts at the actuator's terminals per volt of the drive's reading.

    Parameters
    ----------
    bench : Bench
        Section ``[drive]``: point, divider, amplifier_gain, assumed_load, load.
    recorded : bool
        Whether the reading is the recording's own drive channel, behind the divider, or the
        drive that the bench file states for the line.

    Returns
    -------
    float
        Dimensionless. A divider multiplies; an amplifier between the point and the actuator
        multiplies; a generator that shows volts into ``assumed_load`` with its own source
        impedance equal to that load gives up to twice as much into a higher one.
    """
    point = bench.text("drive.point") or "actuator terminals"
    factor = bench.magnitude("drive.divider", 1.0) if recorded else 1.0
    if point != "actuator terminals":
        factor *= bench.magnitude("drive.amplifier_gain", 1.0)
    if point == "generator setting":
        factor *= _load_factor(bench)
    return factor


def peak_factor(bench: Bench) -> float:
    """Return the zero-to-peak amplitude per unit of the drive's stated reading."""
    return _PEAK[bench.text("drive.reading") or "peak"]


def is_driven(line: Line) -> bool:
    """Return whether the line is in the recorded drive; true where no drive was recorded."""
    if line.drive is None:
        return True
    u = sqrt(float(np.trace(line.drive.covariance)) / 2)
    return bool(abs(line.drive.phasor) > DRIVEN_MIN * u)


def _load_factor(bench: Bench) -> float:
    """Return true over displayed volts of a generator whose source impedance is the assumed load."""
    if bench.get("drive.assumed_load") is None:
        return 1.0
    source_ohm = bench.magnitude("drive.assumed_load")
    if bench.get("drive.load") is None:
        return 2.0
    load_ohm = bench.magnitude("drive.load")
    return 2.0 * load_ohm / (source_ohm + load_ohm)
