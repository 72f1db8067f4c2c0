"""Tracking: the phase of a bench that runs freely through its fringes.

Between the extremes the fringe is inverted sample by sample. Which branch a sample lies on, and how the
phase goes on across an extreme, a pilot line tells: its even harmonics (the mean among them) go as cos φ,
its odd ones as sin φ.
"""

import math
from collections.abc import Sequence
from dataclasses import dataclass, field

import numpy as np
from numpy.typing import NDArray

from calibration.errors import CalibrationError
from calibration.pilot import Pilot, check_pilot
from calibration.tracked_course import TrackedCourse
from calibration.working_point import EDGE

__all__ = ["TrackedPhase", "track_phase", "tracking_assumptions", "tracking_reasons"]

FloatArray = NDArray[np.float64]

_UNSURE = math.radians(60.0)
DECLARED = (
    "the mirror moves with the pilot's drive, its polarity as declared, well below the actuator's "
    "resonance"
)


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
        Samples at an extreme, whose phase is the slow course, the pilot and what other lines were named.
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

        Raises
        ------
        CalibrationError
            If no sample is inverted.
        """
        if not self.inverted.any():
            raise CalibrationError(
                "no sample lies where the fringe can be inverted: what moves beside the pilot and the "
                "slow drift reaches from one extreme to the next"
            )
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
    others_hz: Sequence[float] = (),
    in_board_time: bool = False,
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
    others_hz : sequence of float, optional
        Further driven lines [Hz]: samples at the extremes are carried with them, and fewer are.
    in_board_time : bool, optional
        Whether the frequencies are as the board's clock has them, from the drive's channel: else the
        pilot is looked for within 2 %.

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
    check_pilot(pilot_hz, rate_hz)
    start_s = start_index / rate_hz
    phase = None if pilot_phase_rad is None else pilot_phase_rad + 2 * math.pi * pilot_hz * start_s
    course = TrackedCourse(
        lambda k, n: cosine[k:n],
        len(cosine),
        rate_hz,
        pilot_hz,
        phase,
        others_hz=others_hz,
        in_board_time=in_board_time,
    )
    whole, pilot = course.read(0, len(cosine)), course.pilot.pilot(start_s)
    return TrackedPhase(
        whole.phase_rad,
        whole.inverted,
        whole.carried,
        pilot,
        tracking_assumptions(course, phase),
        tracking_reasons(course, phase),
    )


def tracking_assumptions(
    course: TrackedCourse, phase_rad: float | None, said: str = DECLARED
) -> list[str]:
    """Return what sign and whole fringes of a tracked record rest on.

    Parameters
    ----------
    course : TrackedCourse
        As tracked.
    phase_rad : float or None
        Of the pilot's motion at sample 0, as its drive has it; None where no drive was recorded.
    said : str, optional
        From where it is known which way the drive moves the mirror.

    Returns
    -------
    list of str
        Sentences.
    """
    whole = "whole fringes: the slow phase moves by less than 1.6 rad within half a block, two periods of the pilot and more"
    if phase_rad is None:
        return [whole, "the sign is not known: phase and −phase fit alike"]
    off = math.degrees(_off_rad(course, phase_rad))
    return [
        whole,
        f"sign: {said} (the pilot's phase is off that by {off:.0f}°)",
    ]


def _off_rad(course: TrackedCourse, phase_rad: float) -> float:
    """Return how far the pilot's motion is off what its drive says, up to a quarter turn [rad]."""
    return abs(math.remainder(course.pilot.knots[0].phase_rad - phase_rad, 2.0 * math.pi))


def tracking_reasons(course: TrackedCourse, phase_rad: float | None = None) -> list[str]:
    """Return why a tracked phase must not be trusted.

    Parameters
    ----------
    course : TrackedCourse
        As tracked.
    phase_rad : float or None
        As for `tracking_assumptions`.

    Returns
    -------
    list of str
        Empty where nothing was found.
    """
    tally, reasons = course.tally, course.pilot.pilot(0.0).reasons
    if phase_rad is not None and _off_rad(course, phase_rad) > _UNSURE:
        off = math.degrees(_off_rad(course, phase_rad))
        reasons.append(
            f"the sign is not sure: the pilot moves {off:.0f}° off what its drive says (at most "
            f"{math.degrees(_UNSURE):.0f}°; a quarter turn fits either sign)"
        )
    if tally.lost:
        reasons.append(
            f"the phase is lost for {tally.lost} of {tally.present} samples, first at sample "
            f"{tally.first_lost}: it moved too fast for the pilot; whole fringes may be missing after that"
        )
    jumps = tally.jumps(course.length)
    if jumps:
        first, count = jumps[0]
        reasons.append(
            f"whole fringes may be missing after {len(jumps)} stretches without a phase, the first of "
            f"{count} samples from sample {first}: at the drift's usual speed a fringe is not far off"
        )
    share = tally.inverted / max(tally.present, 1)
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
