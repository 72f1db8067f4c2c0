"""What a live page should show of a bench: its fringe and its dark."""

from collections.abc import Sequence
from math import pi
from typing import TYPE_CHECKING

from calibration.desk.watch.fringe import Fringe
from metro.errors import MetroError

if TYPE_CHECKING:
    from calibration.record import Calibration
    from metro.bench import Bench

__all__ = ["expected_fringe", "known_dark"]


def known_dark(bench: "Bench", calibration: "Calibration | None") -> float | None:
    """Return the voltage without light [V], as calibrated or stated; None where neither says."""
    if calibration is not None and calibration.dark is not None:
        return float(calibration.dark.magnitude)
    dark = bench.get("photodiode.dark")
    return None if dark is None else float(dark.magnitude)


def expected_fringe(bench: "Bench", calibration: "Calibration | None") -> Fringe | None:
    """Return the fringe as calibrated, as the bench file states it, or as its light would make it.

    Parameters
    ----------
    bench : Bench
        Extremes, or power, contrast, responsivity and transimpedance.
    calibration : Calibration or None
        Goes before the bench.

    Returns
    -------
    Fringe or None
        None where nothing says.
    """
    dark_v = known_dark(bench, calibration)
    if calibration is not None:
        extremes = calibration.extremes
        return Fringe.of(extremes.low_v, extremes.high_v, "calibration", dark_v)
    is_stated = bench.get("fringe.low") is not None and bench.get("fringe.high") is not None
    ends = _voltages(bench, (pi, 0.0))
    if ends is None or not ends[1] > ends[0]:
        return None
    return Fringe.of(ends[0], ends[1], "bench" if is_stated else "bench, by its light", dark_v)


def _voltages(bench: "Bench", phases_rad: Sequence[float]) -> list[float] | None:
    from metro.chain import Chain

    try:
        rests = [Chain(bench, phase).working_point().voltage_v for phase in phases_rad]
    except MetroError:
        return None
    known = [volts for volts in rests if volts is not None]
    return known if len(known) == len(rests) else None
