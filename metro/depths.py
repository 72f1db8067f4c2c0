"""How deep the lines may drive the fringe together: the linear range, the drive limit, the converter."""

from __future__ import annotations

import math
from dataclasses import dataclass
from typing import TYPE_CHECKING

from metro.kernel.bessel import bessels
from metro.kernel.lines import line_responses

if TYPE_CHECKING:
    from collections.abc import Sequence

__all__ = ["LINEAR_LOSS", "PEAK_RAD", "Limit", "compressions", "harmonics", "largest_scale"]

LINEAR_LOSS = 0.01
"""Largest loss of a line to the curve of the fringe, all lines together: our choice."""
PEAK_RAD = 1.0
"""Largest sum of all phase amplitudes: leaves 0.57 rad to the fringe's extreme for a working point
that wanders (our choice)."""
_MID_FRINGE_RAD = 0.5 * math.pi


@dataclass(frozen=True, slots=True)
class Limit:
    """The largest common scale of a set of lines, and what sets it.

    Parameters
    ----------
    scale : float
        Factor on every line's amplitude.
    reason : str
        What is reached first.
    """

    scale: float
    reason: str


def compressions(depths_rad: Sequence[float]) -> list[float]:
    """Return what the curve of the fringe takes from each line when all move at once.

    Parameters
    ----------
    depths_rad : sequence of float
        Phase amplitudes [rad].

    Returns
    -------
    list of float
        1 − 2J1(m_i)/m_i · Π J0(m_j), j ≠ i, at mid-fringe.
    """
    return [1.0 - left for left in line_responses(list(depths_rad), _MID_FRINGE_RAD)]


def harmonics(
    depths_rad: Sequence[float], place: int, offset_rad: float = 0.0
) -> tuple[float, float]:
    """Return the second and third harmonic of a line in the photodiode, over the line itself.

    Parameters
    ----------
    depths_rad : sequence of float
        Phase amplitudes of all lines [rad].
    place : int
        Which line.
    offset_rad : float
        How far the working point lies off mid-fringe [rad]; at mid-fringe the second vanishes.

    Returns
    -------
    tuple of float
        |J2/J1·tan(offset)| and |J3/J1|: what the other lines take is common and drops out.
    """
    _, first, second, third = bessels(3, depths_rad[place])
    if first == 0.0:
        return 0.0, 0.0
    return abs(second / first * math.tan(offset_rad)), abs(third / first)


def largest_scale(
    depths_rad: Sequence[float],
    drives_v: Sequence[float],
    *,
    loss: float = LINEAR_LOSS,
    limit_v: float | None = None,
    read_v: float | None = None,
) -> Limit:
    """Return by how much a set of lines may be scaled up or down, all alike.

    Parameters
    ----------
    depths_rad : sequence of float
        Phase amplitudes at scale 1 [rad]; > 0.
    drives_v : sequence of float
        Amplitudes at the actuator's terminals at scale 1, zero to peak [V].
    loss : float
        Largest compression of any line.
    limit_v : float, optional
        Highest voltage at the terminals [V]; all peaks may fall together.
    read_v : float, optional
        Highest voltage at the terminals that the converter still reads [V].

    Returns
    -------
    Limit
        The scale, and what it comes from.
    """
    together_rad, together_v = math.fsum(depths_rad), math.fsum(drives_v)
    found = [
        Limit(_scale_of_loss(depths_rad, loss), f"the fringe takes {100 * loss:.3g} % of a line"),
        Limit(PEAK_RAD / together_rad, f"the lines' peaks together reach {PEAK_RAD:g} rad"),
    ]
    if limit_v is not None:
        reason = f"the lines' peaks together reach the drive limit of {limit_v:g} V"
        found.append(Limit(limit_v / together_v, reason))
    if read_v is not None:
        reason = f"the lines' peaks together reach the {read_v:g} V that the converter can read"
        found.append(Limit(read_v / together_v, reason))
    return min(found, key=lambda limit: limit.scale)


def _scale_of_loss(depths_rad: Sequence[float], loss: float) -> float:
    low, high = 0.0, 1.0 / max(depths_rad)  # at 1 rad a line loses 12 % to itself alone
    while max(compressions([high * m for m in depths_rad])) < loss:
        low, high = high, 1.5 * high
    for _ in range(60):
        middle = 0.5 * (low + high)
        if max(compressions([middle * m for m in depths_rad])) < loss:
            low = middle
        else:
            high = middle
    return low
