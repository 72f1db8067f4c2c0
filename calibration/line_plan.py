"""Line plan: what must be settled before the first sample is summed.

Carriers, unnamed tones, whitening filters and the length of the blocks come from a first look at a
recording. With one plan the sums over its parts, or over further recordings of the same kind, add up.
"""

from dataclasses import dataclass, field
from typing import TYPE_CHECKING

import numpy as np
from numpy.typing import NDArray

from calibration.phase_course import PhaseCourse, clock_course, free_course

if TYPE_CHECKING:
    from calibration.survey import Survey

__all__ = ["LinePlan"]


@dataclass(frozen=True, eq=False, slots=True)
class LinePlan:
    """How lines are summed and fitted.

    Parameters
    ----------
    rate_hz : float
        Sampling rate [Hz].
    named_hz : ndarray, shape (n_lines,)
        Lines as they were named [Hz].
    cycles : ndarray, shape (n_lines,)
        Carriers of the lines, cycles a sample; ``offset`` is in them already.
    offset : float
        Common relative offset that the first look found.
    is_free : bool
        Whether each line has a frequency of its own to be found.
    order : int
        Degree of the phase that the clock is followed with; 0 for not at all.
    tones : tuple of ndarray
        Unnamed tones of each channel, cycles a sample.
    taps : tuple of tuple of float
        Whitening filter of each channel.
    block : int
        Samples in a block.
    start, length : int
        First sample and number of samples that were looked at.
    mains_hz : float
        Frequency of the mains [Hz].
    units : tuple of str
        Coherent SI units of the samples and the drive.
    surveys : tuple of Survey or None
        First look at each channel.
    course : PhaseCourse
        Where the phases are looked for first.
    """

    rate_hz: float
    named_hz: NDArray[np.float64]
    cycles: NDArray[np.float64]
    offset: float
    is_free: bool
    order: int
    tones: tuple[NDArray[np.float64], ...]
    taps: tuple[tuple[float, ...], ...]
    block: int
    start: int
    length: int
    mains_hz: float
    units: tuple[str, str]
    surveys: tuple["Survey | None", ...] = field(repr=False)
    course: PhaseCourse = field(repr=False)

    @property
    def width(self) -> int:
        """Number of channels."""
        return len(self.taps)

    @property
    def reach(self) -> int:
        """Samples before its own that the longest filter needs."""
        return max(len(taps) for taps in self.taps) - 1

    @property
    def every(self) -> int:
        """One sample in so many is kept, to see whether the recording was clipped."""
        return max(1, self.length // _KEPT_SAMPLES)

    def is_same(self, other: "LinePlan") -> bool:
        """Return whether sums by another plan add up with sums by this one."""
        mine, theirs = (
            (p.rate_hz, p.offset, p.is_free, p.order, p.taps, p.block, p.start, p.length, p.units)
            for p in (self, other)
        )
        return mine == theirs and all(
            np.array_equal(self.carriers(k), other.carriers(k)) for k in range(self.width)
        )

    def carriers(self, channel: int) -> NDArray[np.float64]:
        """Return the carriers of a channel, lines before tones, cycles a sample."""
        return np.concatenate([self.cycles, self.tones[channel]])

    def course_over(self, start: int, length: int) -> PhaseCourse:
        """Return where to begin with a recording, this one or another.

        Parameters
        ----------
        start, length : int
            Its first sample and number of samples.

        Returns
        -------
        PhaseCourse
            The plan's own for the recording that it was made from.
        """
        if (start, length) == (self.start, self.length):
            return self.course
        return new_course(
            self.cycles, start, length, self.rate_hz, None if self.is_free else self.order
        )


_KEPT_SAMPLES = 1 << 16


def new_course(
    cycles: NDArray[np.float64], start: int, length: int, rate_hz: float, order: int | None
) -> PhaseCourse:
    """Return a course that is nowhere off yet.

    Parameters
    ----------
    cycles : ndarray, shape (n_lines,)
        Lines, cycles a sample.
    start, length : int
        Of the recording.
    rate_hz : float
        Sampling rate [Hz].
    order : int or None
        Degree of the clock's phase; None where each line has a frequency of its own.

    Returns
    -------
    PhaseCourse
        With all its parameters 0.
    """
    if order is None:
        return free_course(len(cycles), start, length, rate_hz)
    return clock_course(cycles, start, length, order)
