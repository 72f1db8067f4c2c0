"""A gap: samples that never arrived."""

from dataclasses import dataclass

__all__ = ["Gap"]


@dataclass(frozen=True, slots=True)
class Gap:
    """Samples that never arrived.

    Parameters
    ----------
    index : int
        First missing sample: in a recording counted on its grid, from a decoder by the board.
    length : int
        Number of missing samples; 0 where it cannot be known (a decoder at a board reset).
    exact : bool
        True where the board's own counting gives the length, False where a clock does.
    length_u : float
        Standard uncertainty of ``length`` in samples, 0 where exact.
    """

    index: int
    length: int
    exact: bool = True
    length_u: float = 0.0
