"""A free-running record of any length, tracked piece by piece.

Pieces lie on one grid of half blocks and reach over their ends, so that each sample sees what it would
see in the whole record; neighbours are joined by whole fringes where they overlap. What is kept between
pieces is the pilot and the count of fringes.
"""

from collections.abc import Callable, Sequence
from functools import lru_cache

import numpy as np
from numpy.typing import NDArray

from calibration.course_tally import CourseTally
from calibration.errors import CalibrationError
from calibration.pilot import pilot_block, pilot_frequency
from calibration.pilot_course import PilotCourse, PilotKnot, pilot_knot
from calibration.smoother import floor_std, noise_std
from calibration.tracked_piece import MARGIN, TrackedPiece, fast_reach, follow

__all__ = ["PIECE", "TrackedCourse"]

FloatArray = NDArray[np.float64]

PIECE = 1 << 17  # samples
_PERIODS = (4.0, 12.0, 36.0)  # of the pilot in a block: short for fast drift, long for noise
_REACH = (
    12  # half blocks that a piece sees beyond its ends: a round's course reaches over one or two
)
_LONGEST = 1 << 21  # samples: longer blocks are left out, the pieces would not fit into memory
_SLOWEST = 0.3  # periods of a further line in a block: the course follows slower ones
_FASTEST = 0.45  # of the rate
_APART = 0.02  # relative: a nearer one is the pilot itself
_ROOM = 0.2  # rad between an extreme and what 99 of 100 samples move beside the pilot
_PROBES = 6  # pieces from which frequency, noise and length of the blocks are found


class TrackedCourse:
    """The phase of a free-running record, in pieces.

    Parameters
    ----------
    read : callable
        Gives samples ``first`` to ``last`` (not included) of the record, between −1 and 1, NaN where
        missing.
    count : int
        Samples of the record.
    rate_hz, pilot_hz : float
        Sample rate and pilot [Hz].
    phase_rad : float or None
        Of the pilot's motion at sample 0, to half a turn: sets the sign.
    piece : int, optional
        Samples of a piece, about.
    others_hz : sequence of float, optional
        Further lines that may move the mirror [Hz]: samples at the extremes are carried with them.
    in_board_time : bool, optional
        Whether ``pilot_hz`` is as the board's clock has it, from the drive's channel: else it is looked
        for within 2 %.
    length : int, optional
        Samples in a block, even; by default that of three with which most of the phase is known.

    Raises
    ------
    CalibrationError
        If the record is too short, or shows no pilot anywhere.
    """

    def __init__(
        self,
        read: Callable[[int, int], FloatArray],
        count: int,
        rate_hz: float,
        pilot_hz: float,
        phase_rad: float | None = None,
        piece: int = PIECE,
        others_hz: Sequence[float] = (),
        *,
        in_board_time: bool = False,
        length: int | None = None,
    ) -> None:
        self._read, self.count, self.rate_hz = read, count, rate_hz
        self._piece, self._pilot_hz, self._phase_rad = piece, pilot_hz, phase_rad
        self._others_hz, self.frequency_hz = tuple(others_hz), pilot_hz
        pilot_block(rate_hz, pilot_hz, count, _PERIODS[0])
        self.tally, self.margin_rad = CourseTally(), MARGIN
        probes = self._probes()
        if not in_board_time:
            seen = [pilot_frequency(c, rate_hz, pilot_hz, first) for first, c in probes]
            self.frequency_hz = float(np.median(seen))
        self._set(self._best_length(probes) if length is None else length)
        others_hz = self._seen_others(self.length)
        reaches = [fast_reach(piece) for _, piece in self._probed(probes, self.length, others_hz)]
        self.margin_rad = max(MARGIN, float(np.median(reaches or [0.0])) + _ROOM)
        self.pilot = self._pilot_course()
        self._turns: list[int] = []
        self._join()
        self.piece = lru_cache(maxsize=2)(self._own)

    def bounds(self, number: int) -> tuple[int, int]:
        """Return the numbers of a piece's first sample and of the one after its last."""
        return number * self._core, min((number + 1) * self._core, self.count)

    @property
    def pieces(self) -> int:
        """How many pieces there are."""
        return -(-self.count // self._core)

    def read(self, first: int, last: int) -> TrackedPiece:
        """Return samples of the whole, joined.

        Parameters
        ----------
        first, last : int
            Numbers of the first sample and of the one after the last.

        Returns
        -------
        TrackedPiece
            Phase with masks.
        """
        parts = []
        for number in range(first // self._core, -(-last // self._core)):
            begin, end = self.bounds(number)
            own = self.piece(number)
            parts.append(own.part(max(first, begin) - begin, min(last, end) - begin))
        if len(parts) == 1:
            return parts[0]
        names = ("phase_rad", "inverted", "carried", "lost", "course_rad", "expected_rad")
        return TrackedPiece(*(np.concatenate([getattr(p, name) for p in parts]) for name in names))

    def _set(self, length: int) -> None:
        """Set blocks and pieces."""
        self.length, half = length, length // 2
        self._reach = _REACH * half
        self._core = max(self._piece // half, 4 * _REACH) * half

    def _segment(self, number: int) -> tuple[int, int]:
        first, last = self.bounds(number)
        return max(0, first - self._reach), min(self.count, last + self._reach)

    def _probes(self) -> list[tuple[int, FloatArray]]:
        """Return some pieces of the record, and set the noise as they have it."""
        self._set(pilot_block(self.rate_hz, self._pilot_hz, self.count, _PERIODS[0]))
        chosen = np.unique(np.linspace(0, self.pieces - 1, _PROBES).astype(int)).tolist()
        segments = [self._segment(number) for number in chosen]
        probes = [(first, self._read(first, last)) for first, last in segments]
        probes = [(first, cosine) for first, cosine in probes if np.isfinite(cosine).any()]
        if not probes:
            raise CalibrationError("no sample of the record is there")
        self.noise = float(np.median([_noise(cosine) for _, cosine in probes]))
        return probes

    def _best_length(self, probes: list[tuple[int, FloatArray]]) -> int:
        """Return the length of blocks with which most of the phase is known."""
        best, kept = (-1.0, -np.inf), 0
        for periods in _PERIODS:
            try:
                length = pilot_block(self.rate_hz, self._pilot_hz, self.count, periods)
            except CalibrationError:
                break
            if length > _LONGEST // 32 and kept:
                break
            got = self._tried(probes, length)
            if got > best:
                best, kept = got, length
        if best[0] <= 0:
            raise CalibrationError(f"the pilot at {self._pilot_hz:g} Hz shows in no two blocks")
        return kept

    def _tried(self, probes: list[tuple[int, FloatArray]], length: int) -> tuple[float, float]:
        """Return the share that is known with blocks of a length, in steps of 5 %, and how well it fits."""
        known = present = left = 0.0
        for cosine, piece in self._probed(probes, length, ()):
            known += np.count_nonzero(piece.known)
            present += np.count_nonzero(np.isfinite(cosine))
            left += float(np.sum((cosine - np.cos(piece.expected_rad))[piece.known] ** 2))
        if not known:
            return 0.0, -np.inf
        # a half block has two parameters, which take some of the noise with them
        return round(20.0 * known / present), -left / known / (1.0 - 4.0 / length)

    def _probed(
        self, probes: list[tuple[int, FloatArray]], length: int, others_hz: tuple[float, ...]
    ) -> list[tuple[FloatArray, TrackedPiece]]:
        """Return the probes and what they are followed, each by a pilot of its own."""
        pieces = []
        for first, cosine in probes:
            if len(cosine) >= 2 * length:
                knot = self._knot(cosine, first, length, [], others_hz)
                course = PilotCourse(self.frequency_hz, (knot,), others_hz)
                pieces.append((cosine, self._followed(cosine, first, course, length)))
        return pieces

    def _knot(
        self,
        cosine: FloatArray,
        first: int,
        length: int,
        before: list[PilotKnot],
        others_hz: tuple[float, ...],
    ) -> PilotKnot:
        return pilot_knot(
            cosine,
            self.rate_hz,
            self.frequency_hz,
            length,
            first,
            self.noise,
            before,
            self._phase_rad,
            others_hz,
        )

    def _seen_others(self, length: int) -> tuple[float, ...]:
        """Return the further lines that the slow course does not follow, in the board's time."""
        stretch = self.frequency_hz / self._pilot_hz
        return tuple(
            line_hz * stretch
            for line_hz in self._others_hz
            if _SLOWEST * self.rate_hz / length < line_hz < _FASTEST * self.rate_hz
            and abs(line_hz / self._pilot_hz - 1.0) > _APART
        )

    def _followed(
        self, cosine: FloatArray, first: int, course: PilotCourse, length: int
    ) -> TrackedPiece:
        swing = course.swing(first, first + len(cosine), self.rate_hz)
        return follow(cosine, swing, course.depth_rad, length, self.noise, self.margin_rad)

    def _pilot_course(self) -> PilotCourse:
        """Return the pilot, one knot a piece."""
        knots: list[PilotKnot] = []
        others_hz = self._seen_others(self.length)
        for number in range(self.pieces):
            first, last = self._segment(number)
            cosine = self._read(first, last)
            if np.count_nonzero(np.isfinite(cosine)) > 2 * self.length:
                knots.append(self._knot(cosine, first, self.length, knots, others_hz))
        if not knots:
            raise CalibrationError("no piece of the record holds two blocks of samples")
        return PilotCourse(self.frequency_hz, tuple(knots), others_hz)

    def _join(self) -> None:
        """Count the whole fringes of each piece from the one before, and what there is."""
        before: tuple[int, TrackedPiece] | None = None
        last_rad = 0.0
        for number in range(self.pieces):
            start, stop = self._segment(number)
            cosine = self._read(start, stop)
            piece = self._followed(cosine, start, self.pilot, self.length)
            turns = 0 if before is None else _turns(before, (start, piece), last_rad)
            piece = piece.part(0, len(cosine), turns)
            self._turns.append(turns)
            first, last = self.bounds(number)
            own = slice(first - start, last - start)
            self.tally.add(piece.part(own.start, own.stop), cosine[own], first, self.length)
            known = np.flatnonzero(piece.known[: own.stop])
            last_rad = float(piece.course_rad[known[-1]]) if len(known) else last_rad
            before = (start, piece)

    def _own(self, number: int) -> TrackedPiece:
        """Return a piece's own samples, joined to those before."""
        start, stop = self._segment(number)
        first, last = self.bounds(number)
        piece = self._followed(self._read(start, stop), start, self.pilot, self.length)
        return piece.part(first - start, last - start, self._turns[number])


def _turns(
    before: tuple[int, TrackedPiece], after: tuple[int, TrackedPiece], last_rad: float
) -> int:
    """Return the whole fringes between a piece and the one before, joined already.

    Without a known sample that both have, the fringe nearest to the last phase known counts, as over
    any gap.
    """
    (start, left), (begin, right) = before, after
    shared = start + len(left.phase_rad) - begin
    one, two = left.part(begin - start, begin - start + shared), right.part(0, shared)
    both = one.known & two.known
    if both.any():
        apart = float(np.median(one.course_rad[both] - two.course_rad[both]))
    else:
        known = np.flatnonzero(right.known)
        apart = last_rad - float(right.course_rad[known[0]]) if len(known) else 0.0
    return round(apart / (2.0 * np.pi))


def _noise(cosine: FloatArray) -> float:
    floor = floor_std(cosine)
    return min(noise_std(cosine), floor) if floor else noise_std(cosine)
