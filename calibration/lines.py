"""Lines: amplitude and phase of driven lines, with uncertainties that cover.

Lines are fitted jointly with a slow drift by least squares over block phasors, in noise made white by a
short filter; their u comes from the noise beside each, with its Student factor.
"""

from collections.abc import Sequence
from dataclasses import dataclass, replace
from typing import Any

import numpy as np
from numpy.typing import NDArray

from calibration.channel_fit import fit_channel
from calibration.clock import Followed, combine_steps, follow_phases
from calibration.errors import CalibrationError
from calibration.line_fit import Line, LineFit
from calibration.line_result import FittedChannel, ratio_estimate
from calibration.phase_course import PhaseCourse, clock_course, free_course
from calibration.phasors import BlockPhasors, block_phasors
from calibration.survey import SURVEYED, Survey, coarse_offset, look, nearest_peaks, strong_tones
from calibration.whitening import choose_taps

__all__ = ["fit_lines_si"]

_FEWEST_SAMPLES = 16
_FREE_ROUNDS = 20
_FREE_STEP = 1e-11


def fit_lines_si(
    values: NDArray[Any],
    rate_hz: float,
    frequencies_hz: Sequence[float],
    drive: NDArray[Any] | None = None,
    *,
    free: bool = False,
    start_index: int = 0,
    mains_hz: float = 50.0,
    value_unit: str = "1",
    drive_unit: str = "1",
    search_clock: bool = True,
) -> LineFit:
    """Fit lines to samples given as plain numbers.

    Parameters
    ----------
    values : ndarray, shape (n,)
        Samples of any real type, NaN where missing.
    rate_hz : float
        Sampling rate [Hz].
    frequencies_hz : sequence of float
        Lines [Hz], above 0 and below half the rate.
    drive : ndarray, shape (n,), optional
        The drive, sampled with ``values``.
    free : bool
        Fit the frequency of each line too.
    start_index : int
        Number of ``values[0]`` counted from the recording's first sample, where t = 0.
    mains_hz : float
        Frequency of the mains [Hz].
    value_unit, drive_unit : str
        Coherent SI units of the samples and the drive.
    search_clock : bool
        Look for a common relative frequency error of all lines and follow it.

    Returns
    -------
    LineFit
        Lines in the order given.

    Raises
    ------
    CalibrationError
        If a frequency cannot be fitted at this rate, or too few samples are there.
    """
    frequencies = _checked_frequencies(frequencies_hz, rate_hz)
    channels = _checked_channels(values, drive)
    record = _Record(channels, rate_hz, start_index)
    cycles = frequencies / rate_hz
    found = (
        record.free_lines(cycles)
        if free
        else record.given_lines(cycles, 2 if search_clock else 0, mains_hz / rate_hz)
    )
    followed, blocks = found.followed, found.blocks
    fitted = [
        _fitted(phasors, followed, len(cycles), unit)
        for phasors, unit in zip(blocks, (value_unit, drive_unit), strict=False)
    ]
    lines = tuple(_line(fitted, found, k, rate_hz, free=free) for k in range(len(cycles)))
    clock, clock_u = (np.nan, np.nan) if free else _clock(found)
    return LineFit(
        lines,
        clock,
        clock_u,
        followed.dof,
        bool(followed.kept.any()) and not free,
        float(blocks[0].present.sum()) / len(channels[0]),
        len(channels[0]) / rate_hz,
    )


def _checked_frequencies(frequencies_hz: Sequence[float], rate_hz: float) -> NDArray[np.float64]:
    frequencies = np.atleast_1d(np.asarray(frequencies_hz, dtype=np.float64))
    if not rate_hz > 0:
        raise CalibrationError(f"rate must be > 0 Hz, got {rate_hz:g} Hz")
    if not len(frequencies):
        raise CalibrationError("at least one line must be named")
    for f in frequencies:
        if not 0 < f < 0.5 * rate_hz:
            raise CalibrationError(
                f"a line must lie above 0 Hz and below half the sampling rate, {0.5 * rate_hz:g} Hz, got {f:g} Hz"
            )
    if len(np.unique(frequencies)) < len(frequencies):
        raise CalibrationError(
            f"each line must be named once, got {', '.join(f'{f:g} Hz' for f in frequencies)}"
        )
    return frequencies


def _checked_channels(values: NDArray[Any], drive: NDArray[Any] | None) -> list[NDArray[Any]]:
    channels = [np.asarray(values)] + ([] if drive is None else [np.asarray(drive)])
    for name, channel in zip(("samples", "drive"), channels, strict=False):
        if channel.ndim != 1:
            raise CalibrationError(f"{name} must have shape (n,), got {channel.shape}")
        if len(channel) != len(channels[0]):
            raise CalibrationError(
                f"drive must have {len(channels[0])} samples like the response, got {len(channel)}"
            )
        if len(channel) < _FEWEST_SAMPLES:
            raise CalibrationError(
                f"{name} must have at least {_FEWEST_SAMPLES} values, got {len(channel)}"
            )
    return channels


@dataclass(frozen=True, slots=True)
class _Record:
    """The channels of a recording and their place in time."""

    channels: list[NDArray[Any]]
    rate_hz: float
    start: int

    @property
    def length(self) -> int:
        return len(self.channels[0])

    def blocks(
        self,
        cycles: NDArray[np.float64],
        taps: list[tuple[float, ...]],
        tones: list[NDArray[np.float64]],
        *,
        slopes: bool,
    ) -> list[BlockPhasors]:
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

    def given_lines(self, cycles: NDArray[np.float64], order: int, mains: float) -> "_Found":
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
        return _Found(replace(followed, kept=followed.kept | seen), blocks, offset)

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

    def free_lines(self, cycles: NDArray[np.float64]) -> "_Found":
        """Fit lines with frequencies of their own, at first in the noise as it is."""
        surveys = self.surveys()
        cycles = nearest_peaks([s for s in surveys if s], cycles)
        tones = [strong_tones(survey, cycles, self.length) for survey in surveys]
        taps: list[tuple[float, ...]] = [(1.0,)] * len(self.channels)
        found, cycles = self._free_rounds(cycles, taps, tones)
        taps = self.taps(cycles, tones, found.followed.course)
        if any(len(own) > 1 for own in taps):
            found, cycles = self._free_rounds(cycles, taps, tones)
        return found

    def _free_rounds(
        self,
        cycles: NDArray[np.float64],
        taps: list[tuple[float, ...]],
        tones: list[NDArray[np.float64]],
    ) -> tuple["_Found", NDArray[np.float64]]:
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
        return _Found(Followed(course, covariance, dof, kept), blocks), cycles


@dataclass(frozen=True, slots=True)
class _Found:
    followed: Followed
    blocks: list[BlockPhasors]
    offset: float = 0.0  # found by the first look, in the carriers already


def _fitted(phasors: BlockPhasors, followed: Followed, lines: int, unit: str) -> FittedChannel:
    fit = fit_channel(phasors, lines, followed.applied, refine=False)
    functions = followed.course.at(phasors.middles)
    mean = (functions * phasors.counts[:, None]).sum(axis=1) / max(1, phasors.used)
    return FittedChannel(fit, followed, phasors.cycles[:lines], phasors.taps, unit, mean)


def _line(
    fitted: list[FittedChannel], found: _Found, k: int, rate_hz: float, *, free: bool
) -> Line:
    response = fitted[0]
    frequency_u = float(np.sqrt(found.followed.covariance[k, k])) if free else 0.0
    return Line(
        float(response.cycles[k] / (1 + found.offset) * rate_hz),
        frequency_u,
        response.estimate(k),
        response.density(k, rate_hz),
        response.fit.used / rate_hz,
        fitted[1].estimate(k) if len(fitted) > 1 else None,
        ratio_estimate(response, fitted[1], k) if len(fitted) > 1 else None,
    )


def _clock(found: _Found) -> tuple[float, float]:
    """Return the mean relative frequency offset and its u."""
    followed = found.followed
    # P_d(1) − P_d(−1) is 2 for odd degrees and 0 for even ones.
    odd = np.array([degree % 2 for degree in followed.course.degrees], dtype=np.float64)
    if not len(odd):
        return float("nan"), float("nan")
    left = float(odd @ followed.course.theta)
    u = float(np.sqrt(odd @ followed.covariance @ odd))
    return (1 + found.offset) * (1 + left) - 1, (1 + found.offset) * u
