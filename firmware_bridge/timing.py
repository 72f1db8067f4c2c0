"""What the times of samples rest on: the board's counting, a clock, or their arrival."""

from dataclasses import dataclass

__all__ = ["BY_BOARD", "Timing"]


@dataclass(frozen=True, slots=True)
class Timing:
    """What the times of a recording's samples rest on.

    Parameters
    ----------
    is_by_host : bool
        True where nothing but the arrival of the samples at the host tells their times: a sample
        lost on the way moves all that follow, and phases mean nothing.
    jitter_s, jitter_u_s : float
        Rms distance of the moments of sampling from the regular grid [s], and its standard
        uncertainty. A line of frequency f loses the factor exp(−(2πf·jitter)²/2) to it.
    """

    is_by_host: bool = False
    jitter_s: float = 0.0
    jitter_u_s: float = 0.0


BY_BOARD = Timing()
"""Times by the board's own counting, on a regular grid."""
