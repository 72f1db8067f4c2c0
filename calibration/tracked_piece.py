"""A piece of a free-running record followed: its slow course, and each sample's branch of the fringe."""

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from calibration.working_phase import block_rms, working_phases

__all__ = ["MARGIN", "TrackedPiece", "fast_reach", "follow"]

FloatArray = NDArray[np.float64]

_ROUNDS = 3
MARGIN = 0.45  # rad from an extreme within which no sample is inverted: room for the other lines
_LEAST_SINE = 0.2  # of the expected phase: nearer to an extreme the noise is five times as large
_PARTS = 8
_NEAR = 0.95  # |sin φ| of a sample near mid-fringe
_ENDS = 0.35  # rad more within half a block of either end
_SHALLOW = 0.7  # rad: up to here the pilot's whole swing is kept clear of the extremes
_LARGEST_STEP = 1.6  # rad between blocks that overlap by half: beyond, the count of fringes is lost
_WORST = (
    0.5  # rms of what a block leaves of the record: 0.7 where motion beside the pilot is 1 rad rms
)
_WEAKEST = 0.5  # size of (cos φ, sin φ) that a block must show; 1 where nothing moves fast


@dataclass(frozen=True)
class TrackedPiece:
    """Samples of a record, followed.

    Attributes
    ----------
    phase_rad : ndarray, shape (n,)
        Phase [rad]; NaN where it is not known.
    inverted, carried, lost : ndarray of bool, shape (n,)
        Samples inverted between the extremes, carried on at one, and present but lost.
    course_rad : ndarray, shape (n,)
        The slow phase [rad].
    expected_rad : ndarray, shape (n,)
        The slow phase and the pilot [rad].
    """

    phase_rad: FloatArray
    inverted: NDArray[np.bool_]
    carried: NDArray[np.bool_]
    lost: NDArray[np.bool_]
    course_rad: FloatArray
    expected_rad: FloatArray

    @property
    def known(self) -> NDArray[np.bool_]:
        """Samples whose phase is known, inverted or carried; shape (n,)."""
        return self.inverted | self.carried

    def part(self, first: int, last: int, turns: int = 0) -> "TrackedPiece":
        """Return a stretch of it, moved by whole fringes.

        Parameters
        ----------
        first, last : int
            Samples of the piece.
        turns : int, optional
            Whole fringes to add.

        Returns
        -------
        TrackedPiece
            The stretch.
        """
        own, moved = slice(first, last), 2.0 * np.pi * turns
        return TrackedPiece(
            self.phase_rad[own] + moved,
            self.inverted[own],
            self.carried[own],
            self.lost[own],
            self.course_rad[own] + moved,
            self.expected_rad[own] + moved,
        )


def follow(
    cosine: FloatArray,
    swing: FloatArray,
    depth_rad: float,
    length: int,
    noise: float,
    margin_rad: float = MARGIN,
) -> TrackedPiece:
    """Follow a record whose fast motion is known: slow course from blocks, then each sample's branch.

    Parameters
    ----------
    cosine : ndarray, shape (n,)
        The record between −1 and 1; NaN where samples are missing; two blocks and more.
    swing : ndarray, shape (n,)
        The pilot's motion [rad].
    depth_rad : float
        Its depth [rad].
    length : int
        Samples in a block, even.
    noise : float
        Standard deviation of the record's noise.
    margin_rad : float, optional
        Distance from an extreme within which no sample is inverted [rad]: room for what moves beside the
        slow course and the pilot.

    Returns
    -------
    TrackedPiece
        Its first block's phase lies within half a turn of zero.
    """
    count = len(cosine)
    course = np.zeros(count)
    for _ in range(_ROUNDS):
        blocks = working_phases(cosine, course + swing, length)
        course = course + blocks.course(count)
    expected = course + swing
    lost = blocks.lost(count, _WEAKEST) | _torn(course, length)
    lost |= block_rms(cosine - np.cos(expected), length) > _WORST
    present = np.isfinite(cosine)
    phase = _branches(cosine, expected, noise)
    # whether a sample is used rests on the expected phase, not on the sample: where noise chose, it
    # would pull the phase away from the extremes
    clear = np.abs(phase - expected) < np.abs(np.sin(expected))
    inside = _inside(course, expected, depth_rad, _margin(count, length, margin_rad))
    inverted = present & ~lost & inside & (np.abs(cosine) < 1.0) & clear
    carried = present & ~lost & ~inverted
    phase = np.where(inverted, phase, np.where(carried, expected, np.nan))
    return TrackedPiece(phase, inverted, carried, present & lost, course, expected)


def fast_reach(piece: TrackedPiece) -> float:
    """Return how far the phase moves beside the slow course and the pilot [rad].

    Parameters
    ----------
    piece : TrackedPiece
        Followed with any margin.

    Returns
    -------
    float
        The distance that one of a hundred samples near mid-fringe exceeds, where 1.25 rad may be seen, in
        most parts of the piece; 0 where no sample lies there.
    """
    near = piece.inverted & (np.abs(np.sin(piece.expected_rad)) > _NEAR)
    apart = np.abs(piece.phase_rad[near] - piece.expected_rad[near])
    parts = [part for part in np.array_split(apart, _PARTS) if part.size]
    return float(np.median([np.quantile(part, 0.99) for part in parts])) if parts else 0.0


def _branches(cosine: FloatArray, expected: FloatArray, noise: float) -> FloatArray:
    """Return the phase nearest to the expected one whose cosine is the record's.

    The bend of arccos makes noise pull the phase towards the extremes by cos φ·u²/(2 sin³ φ): taken
    off to the second order.
    """
    held = np.clip(cosine, -1.0, 1.0)
    sine = np.maximum(np.sqrt(1.0 - np.cos(expected) ** 2), 0.3)
    angle = np.arccos(held) + held * noise**2 / (2.0 * sine**3)
    turn = 2.0 * np.pi
    up = angle + turn * np.round((expected - angle) / turn)
    down = -angle + turn * np.round((expected + angle) / turn)
    return np.where(np.abs(up - expected) <= np.abs(down - expected), up, down)


def _margin(count: int, length: int, margin_rad: float) -> FloatArray:
    """Return the distance from an extreme that a sample must have [rad], shape (n,).

    It is wider beyond the middles of the first and the last block, where the course only goes on straight.
    """
    margin = np.full(count, margin_rad)
    margin[: length // 2] += _ENDS
    margin[(count // (length // 2) - 1) * (length // 2) :] += _ENDS
    return np.asarray(np.minimum(margin, 0.5 * np.pi))


def _inside(
    course: FloatArray, expected: FloatArray, depth_rad: float, margin: FloatArray
) -> NDArray[np.bool_]:
    """Return the samples that lie clear of the extremes.

    With a shallow pilot whole periods are kept or left out, so that what is left out does not go with
    the pilot; a deep one leaves no whole period.
    """
    if depth_rad < _SHALLOW:
        reach = np.minimum(margin + depth_rad, 0.5 * np.pi)
        near = np.abs(np.sin(expected)) < _LEAST_SINE  # by further lines that are known
        return np.asarray((np.abs(np.sin(course)) > np.sin(reach)) & ~near)
    return np.asarray(np.abs(np.sin(expected)) > np.sin(margin))


def _torn(course: FloatArray, length: int) -> NDArray[np.bool_]:
    """Return where the slow course moves too far within half a block."""
    half = max(length // 2, 1)
    moved = np.zeros(len(course))
    if len(course) > half:
        moved[half:] = np.abs(course[half:] - course[:-half])
        moved[:half] = moved[half]
    return np.asarray(moved > _LARGEST_STEP)
