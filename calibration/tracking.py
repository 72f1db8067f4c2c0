"""Tracking: the phase of a bench that runs freely through its fringes.

Between the extremes the fringe is inverted sample by sample. Which branch a sample lies on, and how the
phase goes on across an extreme, a pilot line tells: its even harmonics (the mean among them) go as cos φ,
its odd ones as sin φ.
"""

import math
from dataclasses import dataclass, field, replace

import numpy as np
from numpy.typing import NDArray

from calibration.errors import CalibrationError
from calibration.pilot import Pilot, find_pilot, pilot_angle, seen_pilot, working_phases
from calibration.smoother import floor_std, noise_std
from calibration.working_point import EDGE

__all__ = ["TrackedPhase", "track_phase"]

FloatArray = NDArray[np.float64]

_ROUNDS = 3
_PERIODS = (4.0, 12.0, 36.0)  # of the pilot in a block
_MARGIN = 0.45  # rad from an extreme within which no sample is inverted: room for the other lines
_SHALLOW = 0.7  # rad: up to here the pilot's whole swing is kept clear of the extremes
_LARGEST_STEP = 1.6  # rad between blocks that overlap by half: beyond, the count of fringes is lost
_WEAKEST = 0.5  # size of (cos φ, sin φ) that a block must show; 1 where nothing moves fast


@dataclass(frozen=True)
class TrackedPhase:
    """Phase of a record through its fringes.

    Attributes
    ----------
    phase_rad : ndarray, shape (n,)
        Phase [rad], φ = 0 at a maximum; NaN where it is not known.
    inverted : ndarray of bool, shape (n,)
        Samples whose phase comes from the fringe itself: exact for any number of lines. Fit lines to
        these alone.
    carried : ndarray of bool, shape (n,)
        Samples at an extreme, whose phase is the slow course and the pilot only.
    pilot : Pilot or None
        The pilot line as found; None without one.
    assumptions : list of str
        What the sign and the whole fringes rest on.
    reasons : list of str
        Why the phase must not be trusted; empty where nothing was found.
    """

    phase_rad: FloatArray
    inverted: NDArray[np.bool_]
    carried: NDArray[np.bool_]
    pilot: Pilot | None
    assumptions: list[str] = field(default_factory=list)
    reasons: list[str] = field(default_factory=list)

    @property
    def known(self) -> NDArray[np.bool_]:
        """Samples whose phase is known, inverted or carried.

        Returns
        -------
        ndarray of bool, shape (n,)
            False where samples are missing or the phase is lost.
        """
        return self.inverted | self.carried

    @property
    def for_lines(self) -> FloatArray:
        """The inverted samples, NaN elsewhere: what lines are fitted to.

        Returns
        -------
        ndarray, shape (n,)
            Phase [rad].
        """
        return np.where(self.inverted, self.phase_rad, np.nan)


def track_phase(
    values: FloatArray,
    rate_hz: float,
    low: float,
    high: float,
    pilot_hz: float | None = None,
    *,
    pilot_phase_rad: float | None = None,
    start_index: int = 0,
) -> TrackedPhase:
    """Track the phase of a record through its fringes.

    Parameters
    ----------
    values : ndarray, shape (n,)
        Photodiode record; NaN where samples are missing.
    rate_hz : float
        Sample rate [Hz]; finite and > 0.
    low, high : float
        Extremes of the fringe, in the record's unit.
    pilot_hz : float, optional
        A driven line of 0.05 rad and more, faster than the drift [Hz]. Without it the phase is known
        up to the first extreme only.
    pilot_phase_rad : float, optional
        Phase of the pilot's motion at t = 0 as its drive has it, polarity included, to half a turn: it
        sets the sign. Without it the phase is known up to its sign.
    start_index : int, optional
        Number of ``values[0]`` counted from the recording's first sample, where t = 0.

    Returns
    -------
    TrackedPhase
        Phase with masks, assumptions and reasons for distrust.

    Raises
    ------
    CalibrationError
        If the rate, the extremes or the pilot break a rule.

    References
    ----------
    A. Dandridge, A. B. Tveten, T. G. Giallorenzi, IEEE J. Quantum Electron. 18 (1982) 1647 (phase
    generated carrier), from memory.
    """
    values = np.asarray(values, dtype=float)
    if not (math.isfinite(rate_hz) and rate_hz > 0.0):
        raise CalibrationError(f"rate_hz must be finite and > 0 Hz, got {rate_hz}")
    if not (math.isfinite(low) and math.isfinite(high) and high > low):
        raise CalibrationError(f"high must be above low, got low {low:g} and high {high:g}")
    cosine = (values - (high + low) / 2.0) / ((high - low) / 2.0)
    if pilot_hz is None:
        return _without_pilot(cosine)
    if not 0.0 < pilot_hz < 0.45 * rate_hz:
        raise CalibrationError(
            f"pilot_hz must be above 0 and below 0.45 of the rate of {rate_hz:g} Hz, got {pilot_hz:g}"
        )
    return _with_pilot(cosine, rate_hz, pilot_hz, pilot_phase_rad, start_index)


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


def _noise(cosine: FloatArray) -> float:
    floor = floor_std(cosine)
    return min(noise_std(cosine), floor) if floor else noise_std(cosine)


def _with_pilot(
    cosine: FloatArray,
    rate_hz: float,
    pilot_hz: float,
    pilot_phase_rad: float | None,
    start_index: int,
) -> TrackedPhase:
    """Track with a pilot: slow course from blocks, then the branch of each sample."""
    tries = []
    for periods in _PERIODS:
        try:
            tries.append(_tried(cosine, rate_hz, pilot_hz, pilot_phase_rad, start_index, periods))
        except CalibrationError:
            if not tries:
                raise
    return max(tries, key=lambda one: (np.count_nonzero(one.known), np.count_nonzero(one.inverted)))


def _tried(
    cosine: FloatArray,
    rate_hz: float,
    pilot_hz: float,
    pilot_phase_rad: float | None,
    start_index: int,
    periods: float,
) -> TrackedPhase:
    """Track with blocks of so many periods of the pilot: short for fast drift, long for noise."""
    pilot = find_pilot(cosine, rate_hz, pilot_hz, start_index, pilot_phase_rad, periods)
    first, course = _followed(cosine, rate_hz, pilot, start_index)
    pilot = seen_pilot(first.for_lines - course, rate_hz, pilot, start_index)
    got, _ = _followed(cosine, rate_hz, pilot, start_index)
    return replace(got, assumptions=_assumptions(pilot, pilot_phase_rad))


def _followed(
    cosine: FloatArray, rate_hz: float, pilot: Pilot, start_index: int
) -> tuple[TrackedPhase, FloatArray]:
    """Follow a known pilot; return the slow course as well."""
    swing = pilot_angle(pilot, len(cosine), rate_hz, start_index)
    course = np.zeros(len(cosine))
    for _ in range(_ROUNDS):
        blocks = working_phases(cosine, course + swing, pilot)
        course = course + blocks.course(len(cosine))
    expected = course + swing
    lost = blocks.lost(len(cosine), _WEAKEST) | _torn(course, blocks.length)
    present = np.isfinite(cosine)
    phase = _branches(cosine, expected, _noise(cosine))
    # whether a sample is used rests on the expected phase, not on the sample: where noise chose, it
    # would pull the phase away from the extremes
    clear = np.abs(phase - expected) < np.abs(np.sin(expected))
    inverted = present & ~lost & _inside(course, expected, pilot) & (np.abs(cosine) < 1.0) & clear
    carried = present & ~lost & ~inverted
    phase = np.where(inverted, phase, np.where(carried, expected, np.nan))
    reasons = _reasons(pilot, present, lost, inverted)
    return TrackedPhase(phase, inverted, carried, pilot, [], reasons), course


def _inside(course: FloatArray, expected: FloatArray, pilot: Pilot) -> NDArray[np.bool_]:
    """Return the samples that lie clear of the extremes.

    With a shallow pilot whole periods are kept or left out, so that what is left out does not go with
    the pilot; a deep one leaves no whole period.
    """
    if pilot.depth_rad < _SHALLOW:
        return np.asarray(np.abs(np.sin(course)) > math.sin(_MARGIN + pilot.depth_rad))
    return np.asarray(np.abs(np.sin(expected)) > math.sin(_MARGIN))


def _torn(course: FloatArray, length: int) -> NDArray[np.bool_]:
    """Return where the slow course moves too far within half a block."""
    half = max(length // 2, 1)
    moved = np.zeros(len(course))
    if len(course) > half:
        moved[half:] = np.abs(course[half:] - course[:-half])
        moved[:half] = moved[half]
    return np.asarray(moved > _LARGEST_STEP)


def _assumptions(pilot: Pilot, pilot_phase_rad: float | None) -> list[str]:
    whole = "whole fringes: the slow phase moves by less than 1.6 rad within half a block, two periods of the pilot and more"
    if pilot_phase_rad is None:
        return [whole, "the sign is not known: phase and −phase fit alike"]
    off = abs(math.remainder(pilot.phase_rad - pilot_phase_rad, 2.0 * math.pi))
    return [
        whole,
        (
            "sign: the mirror moves with the pilot's drive, its polarity as declared, well below the "
            f"actuator's resonance (the pilot's phase is off that by {math.degrees(off):.0f}°)"
        ),
    ]


def _reasons(
    pilot: Pilot,
    present: NDArray[np.bool_],
    lost: NDArray[np.bool_],
    inverted: NDArray[np.bool_],
) -> list[str]:
    reasons = list(pilot.reasons)
    there = int(np.count_nonzero(present))
    gone = int(np.count_nonzero(present & lost))
    if gone:
        first = int(np.flatnonzero(present & lost)[0])
        reasons.append(
            f"the phase is lost for {gone} of {there} samples, first at sample {first}: it moved too fast "
            "for the pilot; whole fringes may be missing after that"
        )
    share = np.count_nonzero(inverted) / max(there, 1)
    if share < 0.2:
        reasons.append(f"only {share:.0%} of the samples lie where the fringe can be inverted")
    return reasons


def _without_pilot(cosine: FloatArray) -> TrackedPhase:
    """Invert on one branch up to the first extreme; what comes after may be on either branch."""
    present = np.isfinite(cosine)
    at_end = np.flatnonzero(present & (np.abs(cosine) >= EDGE))
    stop = int(at_end[0]) if len(at_end) else len(cosine)
    phase = np.full(len(cosine), np.nan)
    phase[:stop] = np.arccos(np.clip(cosine[:stop], -1.0, 1.0))
    inverted = np.isfinite(phase)
    reasons = []
    if stop < len(cosine):
        reasons.append(
            f"the phase is lost at sample {stop}, where the record comes to an extreme of the fringe: a "
            "pilot line is needed to carry it on"
        )
    return TrackedPhase(
        phase,
        inverted,
        np.zeros(len(cosine), dtype=bool),
        None,
        ["the sign is not known: phase and −phase fit alike; phase modulo π"],
        reasons,
    )
