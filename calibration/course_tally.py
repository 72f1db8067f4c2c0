"""What the pass over a tracked record counts: samples, what is lost, and gaps that hide fringes."""

from dataclasses import dataclass, field

import numpy as np
from numpy.typing import NDArray

from calibration.tracked_piece import TrackedPiece

__all__ = ["CourseTally"]

FloatArray = NDArray[np.float64]

_JUMP = 1.6  # rad of drift over missing samples from which whole fringes may have been missed


@dataclass
class CourseTally:
    """What the pass over a record counted.

    Attributes
    ----------
    present, lost, inverted, carried : int
        Samples that are there; of them lost, inverted and carried.
    first_lost : int or None
        Number of the first one lost.
    breaks : list of (int, int)
        Stretches longer than a block without a known phase: first sample and length.
    speed_square, speed_count : float, int
        Of the slow phase's motion within half a block [rad²].
    """

    present: int = 0
    lost: int = 0
    inverted: int = 0
    carried: int = 0
    first_lost: int | None = None
    breaks: list[tuple[int, int]] = field(default_factory=list)
    speed_square: float = 0.0
    speed_count: int = 0
    _last: int | None = None

    def add(self, piece: TrackedPiece, cosine: FloatArray, first: int, length: int) -> None:
        """Add a piece's own samples.

        Parameters
        ----------
        piece : TrackedPiece
            Joined to those before.
        cosine : ndarray, shape (n,)
            Its samples, NaN where missing.
        first : int
            Number of the first one.
        length : int
            Samples in a block.
        """
        self.present += int(np.count_nonzero(np.isfinite(cosine)))
        self.inverted += int(np.count_nonzero(piece.inverted))
        self.carried += int(np.count_nonzero(piece.carried))
        gone = np.flatnonzero(piece.lost)
        self.lost += len(gone)
        if self.first_lost is None and len(gone):
            self.first_lost = first + int(gone[0])
        known = np.flatnonzero(piece.known)
        if len(known):
            self._add_breaks(first + known, length)
        half = length // 2
        moved = (
            piece.course_rad[half::half]
            - piece.course_rad[: -half or None : half][: len(piece.course_rad[half::half])]
        )
        both = piece.known[half::half] & piece.known[::half][: len(moved)]
        self.speed_square += float(np.sum(moved[both] ** 2))
        self.speed_count += int(np.count_nonzero(both))

    def _add_breaks(self, known: NDArray[np.int64], length: int) -> None:
        begin = [] if self._last is None else [self._last]
        numbers = np.concatenate([np.array(begin, dtype=np.int64), known])
        steps = np.diff(numbers)
        for place in np.flatnonzero(steps > length):
            self.breaks.append((int(numbers[place]) + 1, int(steps[place]) - 1))
        self._last = int(known[-1])

    def jumps(self, length: int) -> list[tuple[int, int]]:
        """Return the breaks over which the drift, at its rms speed, may have passed whole fringes.

        Parameters
        ----------
        length : int
            Samples in a block.

        Returns
        -------
        list of (int, int)
            First sample and length of each.
        """
        if not self.speed_count:
            return []
        speed = (self.speed_square / self.speed_count) ** 0.5 / (length // 2)  # rad a sample
        return [(first, count) for first, count in self.breaks if speed * count > _JUMP]
