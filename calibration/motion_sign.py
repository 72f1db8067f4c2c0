"""Which way a drive moves the mirror, as a calibration has found it: what sets the sign of a pilot."""

from dataclasses import dataclass
from math import cos, pi

import numpy as np

from calibration.record import Calibration

__all__ = ["MotionSign", "motion_sign"]

_SAME = 1e-3  # relative: a line of the calibration is the pilot itself


@dataclass(frozen=True)
class MotionSign:
    """Phase of the motion over the drive at one frequency, and what it rests on.

    Parameters
    ----------
    phase_rad : float
        To half a turn [rad].
    said : str
        In words.
    """

    phase_rad: float
    said: str


def motion_sign(calibration: Calibration, frequency_hz: float) -> MotionSign | None:
    """Return the phase of displacement over drive at a frequency.

    Parameters
    ----------
    calibration : Calibration
        Lines with their phases, and the response between them.
    frequency_hz : float
        The pilot [Hz].

    Returns
    -------
    MotionSign or None
        From the line itself, else from the response between the lines, else from the lowest line;
        None where the calibration's drive was not recorded.
    """
    known = [
        (float(entry.frequency.magnitude), float(entry.phase.magnitude))
        for entry in calibration.actuator
        if entry.phase is not None
    ]
    moves = "the mirror moves with the pilot's drive"
    for line_hz, phase_rad in known:
        if abs(line_hz / frequency_hz - 1.0) < _SAME:
            return MotionSign(phase_rad, f"{moves} as the calibration found at {line_hz:g} Hz")
    response = calibration.response
    if response is not None and response.from_hz <= frequency_hz <= response.to_hz:
        phase_rad = float(np.angle(response.extrapolated(np.array([frequency_hz]))[0]))
        return MotionSign(phase_rad, f"{moves} as the calibration found between its lines")
    if not known:
        return None
    line_hz, phase_rad = min(known)
    return MotionSign(
        0.0 if cos(phase_rad) > 0.0 else pi,
        f"{moves} as the calibration found at {line_hz:g} Hz, without a resonance between",
    )
