"""The tracked fringe: metres per volt from a bench that runs freely, as a route of its own.

Wavelength, index, drive reading and readout are common to this route and to the slopes, and cancel when
the two are compared; line fits and the drift of the power are not.
"""

from collections.abc import Sequence
from math import sqrt
from typing import Any

from calibration.actuator_entry import ActuatorEntry
from calibration.extremes import Extremes
from calibration.free_record import FREE_RANGE, FreeRecord
from calibration.route_check import RouteCheck
from calibration.slope_line import CombinedLine
from calibration.term import FRINGE_EXTREMES, LINE_FIT, POWER_DRIFT
from metro.measured import Measured

__all__ = ["TRACKED", "free_line_cautions", "tracked_checks", "tracked_route"]

TRACKED = "tracked fringe"
# Terms of which each recording has its own, or whose size says nothing about their sign.
_NOT_COMMON = (LINE_FIT, POWER_DRIFT, "pick-up", "beam tilt")


def tracked_checks(
    slopes: Sequence[ActuatorEntry],
    free: Sequence[ActuatorEntry],
    lines: Sequence[tuple[CombinedLine, CombinedLine]],
    extremes: Extremes,
) -> list[RouteCheck]:
    """Return the slopes beside the tracked fringe at every line.

    Parameters
    ----------
    slopes, free : sequence of ActuatorEntry
        The same lines by either route.
    lines : sequence of (CombinedLine, CombinedLine)
        What they were made of, in the same order.
    extremes : Extremes
        Common to both.

    Returns
    -------
    list of RouteCheck
        With the standard uncertainty of the difference: terms in common count by their difference.
    """
    return [
        RouteCheck(
            float(one.frequency.magnitude),
            float(one.magnitude.magnitude),
            float(other.magnitude.magnitude),
            _difference_u(one, other, pair, extremes),
            f"slope and {TRACKED}",
        )
        for one, other, pair in zip(slopes, free, lines, strict=True)
    ]


def _difference_u(
    one: ActuatorEntry,
    other: ActuatorEntry,
    pair: tuple[CombinedLine, CombinedLine],
    extremes: Extremes,
) -> float:
    size = float(one.magnitude.magnitude)
    effects = [{c.name: c.effect for c in entry.budget.contributions} for entry in (one, other)]
    square = 0.0
    for name in {*effects[0], *effects[1]}:
        first, second = (found.get(name, 0.0) for found in effects)
        if name.startswith(FRINGE_EXTREMES):
            continue
        own = name.startswith(_NOT_COMMON)
        square += first**2 + second**2 if own else (first - second) ** 2
    steep = pair[1].means.inverse_sin2 - pair[0].means.inverse_sin2
    lean = pair[1].means.cos_over_sin2 - pair[0].means.cos_over_sin2
    moved = size * extremes.u_of(steep / extremes.swing_v, lean / extremes.swing_v)
    return sqrt(square + moved**2)


def tracked_route(
    records: Sequence[FreeRecord], entries: Sequence[ActuatorEntry], *, decides: bool
) -> dict[str, Any]:
    """Return the route as a calibration keeps it.

    Parameters
    ----------
    records : sequence of FreeRecord
        Its recordings.
    entries : sequence of ActuatorEntry
        Metres per volt at every line.
    decides : bool
        Whether the calibration's own coefficients come from it.

    Returns
    -------
    dict
        Name, valid range, recordings with their pilots, coefficients, assumptions and reasons.
    """
    return {
        "route": TRACKED,
        "valid_range": FREE_RANGE,
        "decides": decides,
        "recordings": [_record(record) for record in records],
        "actuator": [entry.to_dict() for entry in entries],
        "assumptions": list(dict.fromkeys(t for r in records for t in r.tracked.assumptions)),
        "reasons": [reason for record in records for reason in record.reasons],
    }


def _record(record: FreeRecord) -> dict[str, Any]:
    tracked, pilot = record.tracked, record.tracked.pilot
    known = tracked.phase_rad[tracked.known]
    return {
        "file": record.name,
        "pilot": None if pilot is None else Measured.of(pilot.frequency_hz, "Hz").to_dict(),
        "depth": None if pilot is None else Measured.of(pilot.depth_rad, "rad").to_dict(),
        "phase_range": [float(known.min()), float(known.max())] if known.size else None,
        "inverted_fraction": float(tracked.inverted.mean()),
        "known_fraction": float(tracked.known.mean()),
    }


def free_line_cautions(lines: Sequence[CombinedLine], swing_v: float) -> list[str]:
    """Return how far free-running recordings let pick-up into the lines.

    Parameters
    ----------
    lines : sequence of CombinedLine
        Without recordings on the slopes.
    swing_v : float
        Half of high − low.

    Returns
    -------
    list of str
        One line.
    """
    share = max(line.one_sided(swing_v) for line in lines)
    return [
        (
            "no lines on the slopes: pick-up is separated from motion as far as the free-running bench "
            f"passed both slopes alike; {share:.0%} of it is left in the lines"
        )
    ]
