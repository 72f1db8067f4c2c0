"""Line record: the passes over a recording that lead to its lines.

A first look finds offsets and tones; one pass gives the block phasors; where the noise is not white, a
second gives those of the whitened samples. Free frequencies renew the carriers until they stand still.
"""

from dataclasses import dataclass, replace
from typing import Any

import numpy as np
from numpy.typing import NDArray

from calibration.channel_fit import fit_channel
from calibration.clock import Followed, combine_steps, follow_phases
from calibration.phase_course import PhaseCourse, clock_course, free_course
from calibration.phasors import BlockPhasors, block_phasors
from calibration.survey import (
    SURVEYED,
    Survey,
    coarse_offset,
    look,
    nearest_peaks,
    strong_tones,
)
from calibration.whitening import choose_taps

__all__ = ["Found", "LineRecord"]

_FREE_ROUNDS = 20
_FREE_STEP = 1e-11


@dataclass(frozen=True, slots=True)
class Found:
    """What the passes found.

    Parameters
    ----------
    followed : Followed
        The phase course.
    blocks : list of BlockPhasors
        Of each channel, whitened.
    surveys : list of Survey or None
        The first look at each channel.
    offset : float
        Relative offset found by the first look; the carriers of ``blocks`` have it already.
    """

    followed: Followed
    blocks: list[BlockPhasors]
    surveys: list[Survey | None]
    offset: float = 0.0


@dataclass(frozen=True, slots=True)
class LineRecord:
    """The channels of a recording and their place in time.

    Parameters
    ----------
    channels : list of ndarray, shape (n,)
        Response and perhaps drive.
    rate_hz : float
        Sampling rate [Hz].
    start : int
        Number of the first sample, counted from the recording's first.
    """

    channels: list[NDArray[Any]]
    rate_hz: float
    start: int

    @property
    def length(self) -> int:
        """Samples in the recording, gaps included."""
        return len(self.channels[0])

    def blocks(
        self,
        cycles: NDArray[np.float64],
        taps: list[tuple[float, ...]],
        tones: list[NDArray[np.float64]],
        *,
        slopes: bool,
    ) -> list[BlockPhasors]:
        """Return the block phasors of each channel at the lines and its tones."""
        return [
            block_phasors(
                channel,
                np.concatenate([cycles, extra]),
                start_index=self.start,
                taps=own,
                slopes=slopes,
            )
            for channel, own, extra in zip(self.channels, taps, tones, strict=True)
        ]

    def surveys(self) -> list[Survey | None]:
        """Return a first look at each channel."""
        return [look(channel) for channel in self.channels]

    def given_lines(self, cycles: NDArray[np.float64], order: int, mains: float) -> Found:
        """Fit lines at given frequencies, their common clock followed."""
        surveys = self.surveys()
        offset = coarse_offset([s for s in surveys if s], cycles, mains) if order else 0.0
        cycles = cycles * (1 + offset)
        tones = [strong_tones(survey, cycles, self.length) for survey in surveys]
        course = clock_course(cycles, self.start, self.length, order)
        taps: list[tuple[float, ...]] = [(1.0,)] * len(self.channels)
        stretch = float(min(self.length, SURVEYED))
        blocks = self.blocks(cycles, taps, tones, slopes=False)
        followed = follow_phases(blocks, len(cycles), course, stretch)
        taps = self.taps(cycles, tones, followed.applied)
        if any(len(own) > 1 for own in taps):
            blocks = self.blocks(cycles, taps, tones, slopes=False)
            followed = follow_phases(blocks, len(cycles), followed.course)
        # An offset seen in the first look is followed, however small what is left of it.
        seen = np.array([degree == 1 for degree in course.degrees], dtype=bool) & (offset != 0)
        return Found(replace(followed, kept=followed.kept | seen), blocks, surveys, offset)

    def taps(
        self,
        cycles: NDArray[np.float64],
        tones: list[NDArray[np.float64]],
        course: PhaseCourse,
    ) -> list[tuple[float, ...]]:
        """Return the whitening filter of each channel, lines and tones taken out first."""
        return [
            choose_taps(channel, cycles, course, own)
            for channel, own in zip(self.channels, tones, strict=True)
        ]

    def free_lines(self, cycles: NDArray[np.float64]) -> Found:
        """Fit lines with frequencies of their own, at first in the noise as it is."""
        surveys = self.surveys()
        cycles = nearest_peaks([s for s in surveys if s], cycles)
        tones = [strong_tones(survey, cycles, self.length) for survey in surveys]
        taps: list[tuple[float, ...]] = [(1.0,)] * len(self.channels)
        found, cycles = self._free_rounds(cycles, taps, tones)
        taps = self.taps(cycles, tones, found.followed.course)
        if any(len(own) > 1 for own in taps):
            found, cycles = self._free_rounds(cycles, taps, tones)
        return replace(found, surveys=surveys)

    def _free_rounds(
        self,
        cycles: NDArray[np.float64],
        taps: list[tuple[float, ...]],
        tones: list[NDArray[np.float64]],
    ) -> tuple[Found, NDArray[np.float64]]:
        """Gauss–Newton in the frequencies, the carriers renewed in each round."""
        course = free_course(len(cycles), self.start, self.length, self.rate_hz)
        for _ in range(_FREE_ROUNDS):
            blocks = self.blocks(cycles, taps, tones, slopes=True)
            fits = [fit_channel(phasors, len(cycles), course) for phasors in blocks]
            step, covariance = combine_steps(fits)
            # Steps of 1e-11 cycles over the record turn no phase by more than 1e-10 rad.
            if (np.abs(step) * self.length / self.rate_hz < _FREE_STEP).all():
                break
            cycles = np.clip(cycles + step / self.rate_hz, 1e-9, 0.5 - 1e-9)
        dof = float(max(noise.dof for fit in fits for noise in fit.noise))
        kept = np.ones(len(step), dtype=bool)
        return Found(Followed(course, covariance, dof, kept), blocks, []), cycles
