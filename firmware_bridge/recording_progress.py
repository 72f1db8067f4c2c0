"""Where a recording stands, for who waits for it."""

from dataclasses import dataclass

__all__ = ["Progress"]


@dataclass(frozen=True, slots=True)
class Progress:
    """Where a recording stands.

    Parameters
    ----------
    samples : int
        Samples on the grid so far.
    wanted : int or None
        How many there shall be.
    rate_hz : float or None
        Announced rate.
    gaps, over_range_frames, bytes_discarded : int
        So far.
    fill : float
        Of the queue, 0 to 1.
    is_lost : bool
        Whether the port is gone and waited for.
    """

    samples: int
    wanted: int | None
    rate_hz: float | None
    gaps: int
    over_range_frames: int
    bytes_discarded: int
    fill: float
    is_lost: bool
