"""The step of the stamps of lines as they come: followed in phase, refined, with its scatter."""

import numpy as np
from numpy.typing import NDArray

__all__ = ["StampStep"]

_TRACKED = 8  # lines over which the phase of the stamps is averaged
_REFINED = 256  # lines from which on their own stamps tell the step better than the first seconds


class StampStep:
    """Tell by how many samples stamps are ahead of a regular grid.

    Parameters
    ----------
    step_s : float
        Time between lines, from the first seconds [s].
    step_u : float
        Its relative standard uncertainty.
    scatter_s : float
        Rms scatter of the stamps [s].
    """

    def __init__(self, step_s: float, step_u: float, scatter_s: float) -> None:
        self.step_s = step_s
        """Time between lines [s]."""
        self.step_u = step_u
        """Its relative standard uncertainty."""
        self.at_s: float | None = None
        """The stamp, smoothed, of the last line placed; None before the first."""
        self._first_scatter_s = scatter_s
        self._since = (0.0, 0)  # stamp where the present stretch began, and samples since
        self._square, self._counted = 0.0, 0

    @property
    def scatter_s(self) -> float:
        """Rms scatter of the stamps about a steady step so far [s]."""
        if self._counted < _REFINED:
            return self._first_scatter_s
        return float(np.sqrt(self._square / self._counted)) * self.step_s

    def begin_before(self, stamp_s: float) -> None:
        """Begin one step before the first line.

        Parameters
        ----------
        stamp_s : float
            Its stamp [s].
        """
        self.at_s = stamp_s - self.step_s
        self._since = (stamp_s, -1)

    def begin_at(self, stamp_s: float) -> None:
        """Begin anew at a line that has been placed.

        Parameters
        ----------
        stamp_s : float
            Its stamp [s].
        """
        self.at_s, self._since = stamp_s, (stamp_s, 0)

    def ahead(self, stamps_s: NDArray[np.float64]) -> NDArray[np.float64]:
        """Return by how many samples each line is later than if none were missing.

        Parameters
        ----------
        stamps_s : ndarray, shape (n,)
            Of the lines behind the last one placed [s].

        Returns
        -------
        ndarray, shape (n,)
            In steps.
        """
        assert self.at_s is not None  # noqa: S101  # set before the first line is placed
        step = np.arange(1, stamps_s.size + 1)
        late: NDArray[np.float64] = (stamps_s - self.at_s) / self.step_s - step
        return late

    def advance(self, ahead: NDArray[np.float64], missing: int, reach: float) -> None:
        """Go on by some lines, and follow the phase of their stamps.

        Parameters
        ----------
        ahead : ndarray, shape (n,)
            As `ahead` has it.
        missing : int
            Samples missing before them.
        reach : float
            Lines off by this many samples or more do not count.
        """
        assert self.at_s is not None  # noqa: S101  # set before the first line is placed
        ahead = ahead - missing
        near = ahead[np.abs(ahead) < reach]
        count, moved = ahead.size + missing, self._moved(near)
        self.at_s += (count + moved) * self.step_s
        self._since = (self._since[0], self._since[1] + count)
        self._refine(self.at_s)

    def _moved(self, near: NDArray[np.float64]) -> float:
        """Return by how many samples the phase moves with these lines, and count their scatter."""
        if not near.size:
            return 0.0
        moved = float(near.mean()) * near.size / (near.size + _TRACKED)
        self._square += float(np.sum((near - moved) ** 2))
        self._counted += near.size
        return moved

    def _refine(self, at_s: float) -> None:
        start_s, samples = self._since
        if samples >= _REFINED and at_s > start_s:
            self.step_s = (at_s - start_s) / samples
            self.step_u = 2 * self.scatter_s / (at_s - start_s)
