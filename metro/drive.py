"""How the drive is read: from a reading to volts at the actuator's terminals, zero to peak."""

from typing import TYPE_CHECKING

if TYPE_CHECKING:
    from metro.bench import Bench

__all__ = ["amplifier_gain", "peak_factor", "point_factor", "terminal_factor"]

_PEAK: dict[str, float] = {"peak": 1.0, "peak-to-peak": 0.5, "rms": 2.0**0.5}


def peak_factor(bench: "Bench") -> float:
    """Return the zero-to-peak amplitude per unit of the drive's stated reading.

    Parameters
    ----------
    bench : Bench
        Its ``[drive] reading``; peak where not stated.

    Returns
    -------
    float
        1, 1/2 or √2.
    """
    return _PEAK[bench.text("drive.reading") or "peak"]


def point_factor(bench: "Bench") -> float:
    """Return volts at the actuator's terminals per volt at the point where the drive is read.

    Parameters
    ----------
    bench : Bench
        Section ``[drive]``: point, amplifier_gain, assumed_load, load.

    Returns
    -------
    float
        Dimensionless; 1 at the terminals. An amplifier between multiplies; a generator that shows
        volts into ``assumed_load``, with a source impedance equal to that load, gives up to
        twice as much into a higher one.
    """
    factor = amplifier_gain(bench)
    if bench.text("drive.point") == "generator setting":
        factor *= _load_factor(bench)
    return factor


def terminal_factor(bench: "Bench", *, recorded: bool) -> float:
    """Return volts at the actuator's terminals per volt of the drive's reading.

    Parameters
    ----------
    bench : Bench
        Section ``[drive]``.
    recorded : bool
        Whether the reading is the recording's own drive channel, a true voltage behind
        ``divider``, or the drive that the bench file states for the line.

    Returns
    -------
    float
        Dimensionless. What a generator shows for an assumed load concerns only the stated drive.
    """
    if not recorded:
        return point_factor(bench)
    return bench.magnitude("drive.divider", 1.0) * amplifier_gain(bench)


def amplifier_gain(bench: "Bench") -> float:
    """Return the gain between the point where the drive is read and the actuator's terminals.

    Parameters
    ----------
    bench : Bench
        Its ``[drive] point`` and ``amplifier_gain``.

    Returns
    -------
    float
        1 at the terminals.
    """
    if (bench.text("drive.point") or "actuator terminals") == "actuator terminals":
        return 1.0
    return bench.magnitude("drive.amplifier_gain", 1.0)


def _load_factor(bench: "Bench") -> float:
    """Return true over displayed volts of a generator whose source impedance is the assumed load."""
    if bench.get("drive.assumed_load") is None:
        return 1.0
    source_ohm = bench.magnitude("drive.assumed_load")
    if bench.get("drive.load") is None:
        return 2.0
    load_ohm = bench.magnitude("drive.load")
    return 2.0 * load_ohm / (source_ohm + load_ohm)
