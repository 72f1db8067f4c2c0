"""Where a fringe's extremes and dark level come from: given values or another recording."""

from collections.abc import Iterable
from dataclasses import dataclass
from pathlib import Path

import numpy as np

from calibration.dark import dark_level
from calibration.errors import CalibrationError
from calibration.scan import ScanFit, fit_scan
from firmware_bridge.trace import Trace
from metro.units import si
from metro.value_text import split_value

__all__ = ["Level", "dark_of_trace", "is_file", "level_of_text", "unit_of_text", "usable_scan"]

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


def unit_of_text(texts: Iterable[str | None], unit: str) -> str:
    """Return the unit of a recording, from the levels given for it where it names none itself.

    Parameters
    ----------
    texts : iterable of str or None
        Levels as given on the command line, such as "0.44 V".
    unit : str
        Unit of the recording, "1" where it names none.

    Returns
    -------
    str
        "V" where the recording names none and a level has a unit.
    """
    if unit not in ("", "1"):
        return unit
    own = [split_value(text, "level")[1] for text in texts if text is not None]
    return "V" if any(name not in _COUNTS for name in own) else unit


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
    count = int(np.count_nonzero(np.isfinite(trace.values)))
    level = dark_level([trace.values]) if count >= 32 else None
    if level is None:
        raise CalibrationError(f"a dark recording needs 32 samples, got {count}")
    return Level(float(level.magnitude), float(level.u_magnitude))


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
