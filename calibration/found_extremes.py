"""Where a fringe's extremes and dark level come from: given values or another recording."""

import math
from dataclasses import dataclass
from pathlib import Path

import numpy as np

from calibration.errors import CalibrationError
from calibration.scan import ScanFit, fit_scan
from firmware_bridge.trace import Trace
from metro.units import si
from metro.value_text import split_value

__all__ = ["Level", "dark_of_trace", "level_of_text", "usable_scan"]

_COUNTS = ("", "1", "count", "counts")


@dataclass(frozen=True)
class Level:
    """A level of the photodiode in the recording's unit, with its standard uncertainty."""

    value: float
    u: float = 0.0


def level_of_text(text: str, name: str, unit: str) -> Level:
    """Return a level given as text.

    Parameters
    ----------
    text : str
        Such as "0.5 V", or "412" or "412 counts" for a recording in counts.
    name : str
        The option, for messages.
    unit : str
        Unit of the recording, "1" where it names none.

    Returns
    -------
    Level
        In the recording's unit. A recording without a unit takes volts and counts as they are.

    Raises
    ------
    MetroError
        If it is no such value, or a bare number where the recording is in volts.
    """
    number, own = split_value(text, name)
    if own in _COUNTS and unit in _COUNTS:
        return Level(number)
    return Level(float(si(text, name, "V" if unit in _COUNTS else unit)))


def dark_of_trace(trace: Trace) -> Level:
    """Return the mean of a recording without light.

    Parameters
    ----------
    trace : Trace
        The photodiode with the beam blocked.

    Returns
    -------
    Level
        Mean with its standard uncertainty from the scatter of 16 blocks, so that hum and drift count.

    Raises
    ------
    CalibrationError
        If there are fewer than 32 samples.
    """
    good = trace.values[np.isfinite(trace.values)]
    if len(good) < 32:
        raise CalibrationError(f"a dark recording needs 32 samples, got {len(good)}")
    blocks = np.array([part.mean() for part in np.array_split(good, 16)])
    return Level(float(good.mean()), float(blocks.std(ddof=1)) / math.sqrt(len(blocks)))


def is_file(text: str) -> bool:
    """Return whether a text names a file that is there.

    Parameters
    ----------
    text : str
        As given on the command line.

    Returns
    -------
    bool
        True for a file or any other path that exists.
    """
    return Path(text).exists()


def usable_scan(trace: Trace, path: str) -> ScanFit:
    """Return the extremes that a recording over whole fringes shows.

    Parameters
    ----------
    trace : Trace
        The scan.
    path : str
        Its file, for messages.

    Returns
    -------
    ScanFit
        Extremes with covariance and reasons for distrust.

    Raises
    ------
    CalibrationError
        If nothing can be fitted.
    """
    try:
        return fit_scan(trace.values, trace.rate_hz)
    except CalibrationError as error:
        raise CalibrationError(f"{path}: {error}") from None
