"""What the bench holds: one value with where it came from, one drive line."""

from collections.abc import Iterable
from dataclasses import dataclass

from metro.display import show
from metro.errors import MetroError
from metro.measured import Measured

__all__ = ["NORMAL", "RECTANGULAR", "BenchError", "BenchLine", "Entry", "MotionPoint", "nearest"]

_LISTED = 12  # known names: more would hide what is wrong

NORMAL = "normal"
RECTANGULAR = "rectangular"
"""The distributions from which the error of a value may come."""


class BenchError(MetroError):
    """A bench file that breaks a rule, or a bench that does not say what is needed."""


@dataclass(frozen=True, slots=True)
class BenchLine:
    """One drive line of the bench.

    Parameters
    ----------
    frequency_hz : float
        Line frequency [Hz].
    drive_v : float or None
        Drive amplitude as ``[drive] reading`` says it is read [V]; None where not given.
    drive_u_v : float
        Its standard uncertainty [V]; 0 where not given.
    """

    frequency_hz: float
    drive_v: float | None = None
    drive_u_v: float = 0.0

    def __str__(self) -> str:
        drive = "drive not given" if self.drive_v is None else f"drive {show(self.drive_v, 'V', 7)}"
        u = f", u = {show(self.drive_u_v, 'V', 3)}" if self.drive_u_v else ""
        return f"{show(self.frequency_hz, 'Hz', 10)}, {drive}{u}"


@dataclass(frozen=True, slots=True)
class MotionPoint:
    """How much the arms move of themselves at one frequency.

    Parameters
    ----------
    frequency_hz : float
        Frequency [Hz].
    density_m : float
        One-sided amplitude density of differential displacement [m/√Hz].
    """

    frequency_hz: float
    density_m: float

    def __str__(self) -> str:
        density = show(self.density_m, "m/Hz**0.5", 5)
        return f"{density} at {show(self.frequency_hz, 'Hz', 10)}"


@dataclass(frozen=True, slots=True)
class Entry:
    """One value of the bench.

    Parameters
    ----------
    value : Measured or str
        The value, in SI units; text for a text key.
    source : str
        Where it came from: the file and key, the option, or a default.
    distribution : str
        ``"normal"`` or ``"rectangular"``.
    note : str
        What the file says of its origin, such as a certificate; empty where it says nothing.
    given : str
        The value as it was written; empty where it was computed.
    """

    value: Measured | str
    source: str
    distribution: str = NORMAL
    note: str = ""
    given: str = ""

    def __str__(self) -> str:
        return self.given or str(self.value)


def nearest(name: str, known: Iterable[str]) -> str:
    """Return the end of a message that names the nearest known name.

    Parameters
    ----------
    name : str
        What was given.
    known : iterable of str
        The known names.

    Returns
    -------
    str
        Such as ``"; the nearest known is 'laser'"``; where none is near, all of them, or nothing
        where these are many.
    """
    from difflib import get_close_matches

    names = list(known)
    close = get_close_matches(name, names, 1, 0.5)
    if close:
        return f"; the nearest known is {close[0]!r}"
    return f"; known are {', '.join(map(repr, names))}" if len(names) <= _LISTED else ""
