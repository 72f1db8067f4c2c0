"""The pilot over a whole record: frequency in the board's time, depth and phase from piece to piece."""

import math
from collections.abc import Sequence
from dataclasses import dataclass, field, replace

import numpy as np
from numpy.typing import NDArray

from calibration.pilot import Pilot, find_pilot, seen_pilot
from calibration.tracked_piece import follow

__all__ = ["PilotCourse", "PilotKnot", "pilot_knot"]

FloatArray = NDArray[np.float64]

_ROUNDS = 3
_NEAR = 0.8  # |sin φ| of the samples from which further lines are found
_FEWEST = 64  # such samples a line
_DEEPEST = 2.3  # rad


@dataclass(frozen=True)
class PilotKnot:
    """The pilot about one place of the record.

    Attributes
    ----------
    at : float
        Number of the sample.
    depth_rad, phase_rad : float
        Depth, and phase at sample 0 as the frequency has it [rad].
    others : tuple of complex
        Phasors of further lines at sample 0 [rad].
    reasons : list of str
        Why it must not be trusted there.
    """

    at: float
    depth_rad: float
    phase_rad: float
    others: tuple[complex, ...] = ()
    reasons: list[str] = field(default_factory=list)


@dataclass(frozen=True)
class PilotCourse:
    """A pilot whose depth and phase move slowly.

    Attributes
    ----------
    frequency_hz : float
        In the board's time [Hz].
    knots : tuple of PilotKnot
        In order; phases are at sample 0, without jumps.
    others_hz : tuple of float
        Further lines that move the mirror, in the board's time [Hz].
    """

    frequency_hz: float
    knots: tuple[PilotKnot, ...]
    others_hz: tuple[float, ...] = ()

    @property
    def depth_rad(self) -> float:
        """Median depth [rad]."""
        return float(np.median([knot.depth_rad for knot in self.knots]))

    def swing(self, first: int, last: int, rate_hz: float) -> FloatArray:
        """Return the motion of the pilot and of the further lines.

        Parameters
        ----------
        first, last : int
            Numbers of the samples.
        rate_hz : float
            Sample rate [Hz].

        Returns
        -------
        ndarray, shape (last − first,)
            Phase [rad].
        """
        number = np.arange(first, last)
        at = [knot.at for knot in self.knots]
        depth = np.interp(number, at, [knot.depth_rad for knot in self.knots])
        phase = np.interp(number, at, [knot.phase_rad for knot in self.knots])
        swing = depth * np.cos(2.0 * np.pi * self.frequency_hz * number / rate_hz + phase)
        phasors = np.array([knot.others for knot in self.knots], dtype=complex)
        for line, line_hz in enumerate(self.others_hz):
            size = np.interp(number, at, phasors[:, line])
            swing = swing + (size * np.exp(2j * np.pi * line_hz / rate_hz * number)).real
        return np.asarray(swing)

    def swing_of_pilot(self, first: int, last: int, rate_hz: float) -> FloatArray:
        """Return the pilot's motion alone.

        Parameters
        ----------
        first, last : int
            Numbers of the samples.
        rate_hz : float
            Sample rate [Hz].

        Returns
        -------
        ndarray, shape (last − first,)
            Phase [rad].
        """
        return replace(self, others_hz=()).swing(first, last, rate_hz)

    def pilot(self, start_s: float) -> Pilot:
        """Return the pilot in numbers.

        Parameters
        ----------
        start_s : float
            Time of sample 0 from the recording's first, where t = 0 [s].

        Returns
        -------
        Pilot
            Median depth, phase at t = 0 as the first piece has it, reasons.
        """
        phase = self.knots[0].phase_rad - 2.0 * math.pi * self.frequency_hz * start_s
        phase = math.remainder(phase, 2.0 * math.pi)
        return Pilot(self.frequency_hz, self.depth_rad, phase, self._reasons())

    def _reasons(self) -> list[str]:
        doubtful = [knot for knot in self.knots if knot.reasons]
        if not doubtful:
            return []
        reasons = list(doubtful[0].reasons)
        if len(self.knots) > 1:
            reasons[0] += f"; so in {len(doubtful)} of {len(self.knots)} pieces of the record"
        return reasons


def pilot_knot(
    cosine: FloatArray,
    rate_hz: float,
    frequency_hz: float,
    length: int,
    start_index: int,
    noise: float,
    before: Sequence[PilotKnot],
    phase_rad: float | None,
    others_hz: tuple[float, ...] = (),
) -> PilotKnot:
    """Return the pilot in a piece, found from its harmonics and then from the phase itself.

    Parameters
    ----------
    cosine : ndarray, shape (n,)
        The piece, between −1 and 1; NaN where samples are missing.
    rate_hz, frequency_hz : float
        Sample rate and the pilot, in the board's time [Hz].
    length : int
        Samples in a block.
    start_index : int
        Number of the piece's first sample.
    noise : float
        Standard deviation of the record's noise.
    before : sequence of PilotKnot
        Of the pieces before: the last one tells the sign.
    phase_rad : float or None
        Of the pilot's motion at sample 0, to half a turn: the sign of the first piece.
    others_hz : tuple of float, optional
        Further lines, in the board's time [Hz].

    Returns
    -------
    PilotKnot
        That of the piece before, with reasons, where the pilot does not show.
    """
    last = before[-1] if before else None
    sign = phase_rad if last is None else last.phase_rad
    at = start_index + 0.5 * len(cosine)
    found = find_pilot(cosine, rate_hz, frequency_hz, length, start_index, sign)
    if found.reasons and last is not None:
        return PilotKnot(at, last.depth_rad, last.phase_rad, last.others, found.reasons)
    others: tuple[complex, ...] = (0j,) * len(others_hz)
    pilot = found
    for _ in range(_ROUNDS if others_hz else 1):
        knot = PilotKnot(at, pilot.depth_rad, pilot.phase_rad, others)
        course = PilotCourse(frequency_hz, (knot,), others_hz)
        swing = course.swing(start_index, start_index + len(cosine), rate_hz)
        piece = follow(cosine, swing, pilot.depth_rad, length, noise)
        own = course.swing_of_pilot(start_index, start_index + len(cosine), rate_hz)
        rest = np.where(piece.inverted, piece.phase_rad - piece.expected_rad, np.nan)
        pilot = seen_pilot(rest + own, rate_hz, pilot, start_index)
        near = np.where(np.abs(np.sin(piece.expected_rad)) > _NEAR, rest, np.nan)
        others = _more(others, near, rate_hz, others_hz, start_index)
    phase = pilot.phase_rad
    if last is not None:
        phase = last.phase_rad + math.remainder(phase - last.phase_rad, 2.0 * math.pi)
    return PilotKnot(at, pilot.depth_rad, phase, others, found.reasons)


def _more(
    others: tuple[complex, ...],
    rest: FloatArray,
    rate_hz: float,
    others_hz: tuple[float, ...],
    start_index: int,
) -> tuple[complex, ...]:
    """Return the phasors of further lines with what is left of them in a phase."""
    known = np.flatnonzero(np.isfinite(rest))
    if not others_hz or len(known) < _FEWEST * len(others_hz):
        return others
    turned = np.outer(start_index + known, 2.0 * np.pi * np.array(others_hz) / rate_hz)
    columns = np.hstack([np.ones((len(known), 1)), np.cos(turned), -np.sin(turned)])
    found = np.linalg.lstsq(columns, rest[known], rcond=None)[0][1:]
    left = found[: len(others_hz)] + 1j * found[len(others_hz) :]
    new = np.array(others) + left
    return tuple(new.tolist()) if np.abs(new).max() < _DEEPEST else others
