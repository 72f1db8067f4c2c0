"""Counting fringes: how far a swept mirror went, pass by pass, in fringes.

A fringe is 2π of phase. The count is the phase that the record went through, fractions at both ends
of a pass included, after ISO 16063-11, method 1, and for scans. False counts from noise and vibration
are kept out by a band of hysteresis.
"""

import math
from dataclasses import dataclass, field, replace

import numpy as np
from numpy.typing import NDArray

from calibration.count_reasons import count_reasons
from calibration.envelope import Envelope, constant_envelope, running_envelope
from calibration.errors import CalibrationError
from calibration.scan import ScanFit, fit_scan
from calibration.smoother import noise_std
from calibration.swept_record import SweptRecord, averaged, ready_to_count
from calibration.turning_points import turning_points
from calibration.unfolding import Unfolded, drive_turns, slow_spots, unfold_fringe

__all__ = ["FringeCount", "Pass", "count_fringes"]

FloatArray = NDArray[np.float64]

_TURN_BAND_RAD = math.pi  # a way back of less than half a fringe is vibration, not a new pass
_END_BAND_RAD = 1.0  # nor is a shorter one at an end of the record
_HIDDEN = 0.16  # fringes: 28° there and back
_LAW_U = 0.005  # fringes: what a harmonic of 3 % in the law moves the phase by


@dataclass(frozen=True)
class Pass:
    """A stretch in which the mirror went one way.

    Attributes
    ----------
    start_index, stop_index : int
        Samples of the record, the last one included.
    fringes : float
        Fringes gone through, > 0.
    fringes_u : float
        Standard uncertainty.
    direction : int
        1 with the drive, −1 against it, 0 where unknown.
    fastest : float
        Fringes per sample where it went fastest.
    """

    start_index: int
    stop_index: int
    fringes: float
    fringes_u: float
    direction: int
    fastest: float


@dataclass(frozen=True)
class FringeCount:
    """Fringes of a swept record.

    Attributes
    ----------
    scan : ScanFit
        Extremes of the fringe.
    passes : list of Pass
        In order.
    phase_rad : ndarray, shape (n,)
        Phase of each sample [rad], NaN where missing; the sign is the drive's, else the first pass's.
    net_fringes : float
        Fringes from the first sample to the last, with the drive's sign where one is given.
    net_u : float
        Its standard uncertainty.
    span_range : tuple of float
        Least and greatest span of the fringe along the record, in its unit.
    spikes : int
        Lone samples far off their neighbours, left out.
    reasons : list of str
        Why the count must not be trusted; empty where nothing was found.
    """

    scan: ScanFit
    passes: list[Pass]
    phase_rad: FloatArray
    net_fringes: float
    net_u: float
    span_range: tuple[float, float]
    spikes: int
    reasons: list[str] = field(default_factory=list)

    @property
    def fringes(self) -> float:
        """Fringes of all passes together, whatever their direction.

        Returns
        -------
        float
            ≥ 0.
        """
        return math.fsum(one.fringes for one in self.passes)

    @property
    def fringes_u(self) -> float:
        """Standard uncertainty of ``fringes``.

        Returns
        -------
        float
            In fringes; what hides next to an extreme hides at every turn alike, so that it adds up.
        """
        return math.fsum(one.fringes_u for one in self.passes)

    @property
    def per_period(self) -> tuple[float, float] | None:
        """Fringes per period of a mirror that goes to and fro, R_f of ISO 16063-11, method 1.

        Returns
        -------
        tuple of float, or None
            Mean over pairs of whole passes and its standard uncertainty; None with fewer than two
            whole passes, unequal ones, or no drive. The first and the last pass of a record are not whole.
        """
        whole = np.array([one.fringes for one in self.passes[1:-1]])
        if len(whole) < 2:
            return None
        whole = whole[: 2 * (len(whole) // 2)]
        pairs = whole[::2] + whole[1::2]
        each = max(one.fringes_u for one in self.passes[1:-1]) * math.sqrt(2.0)
        scatter = float(pairs.std(ddof=1)) if len(pairs) > 1 else 0.0
        # a turning point that was not seen makes two passes one
        if float(whole.min()) < 0.5 * float(whole.max()) or self.passes[0].direction == 0:
            return None
        # what hides next to an extreme hides at every turn alike: the mean does not lessen it
        return float(pairs.mean()), max(each, scatter / math.sqrt(len(pairs)))


def count_fringes(
    values: FloatArray,
    rate_hz: float,
    drive: FloatArray | None = None,
    *,
    extremes: tuple[float, float] | None = None,
) -> FringeCount:
    """Count the fringes of a swept record.

    Parameters
    ----------
    values : ndarray, shape (n,)
        Photodiode record, any unit; NaN where samples are missing.
    rate_hz : float
        Sample rate [Hz].
    drive : ndarray, shape (n,), optional
        What moves the mirror, any unit: tells the direction.
    extremes : tuple of float, optional
        (low, high) of the fringe where known; else those that the record shows.

    Returns
    -------
    FringeCount
        Passes with their fringes, and reasons for distrust.

    Raises
    ------
    CalibrationError
        If there are fewer than 40 samples, or the record does not change.

    References
    ----------
    ISO 16063-11:1999, method 1 (fringe counting), cited from memory.
    """
    values = np.asarray(values, dtype=float)
    scan = fit_scan(values, rate_hz)
    record = ready_to_count(values)
    stop = record.first + len(record.values)
    along = None if drive is None else _bridged(drive[record.first : stop])
    envelope, span_range = _envelope(record, scan, extremes)
    got = unfold_fringe(record.values, envelope, record.noise, along)
    if drive is None and len(got.phase_rad) and got.phase_rad[-1] < got.phase_rad[0]:
        got = _turned(got)
    passes = _passes(got, record, along)
    phase = np.full(len(values), np.nan)
    phase[record.first : stop] = got.phase_rad
    phase[~np.isfinite(values)] = np.nan
    ends = _end_u(got, np.array([0, len(record.values) - 1]))
    return FringeCount(
        scan,
        passes,
        phase,
        float(got.phase_rad[-1] - got.phase_rad[0]) / (2.0 * math.pi),
        math.hypot(*ends.tolist(), *(one.fringes_u for one in passes[1:-1])),
        span_range,
        record.spikes,
        count_reasons(
            values, record, envelope, got, scan if extremes is None else None, span_range, along
        )
        + _shaking(passes, along),
    )


def _bridged(drive: FloatArray) -> FloatArray:
    good = np.flatnonzero(np.isfinite(drive))
    if len(good) < 2:
        raise CalibrationError("the drive has no samples where the photodiode has")
    filled = np.interp(np.arange(len(drive)), good, drive[good])
    # where noise hides the steps of the drive, so does it the moment of its turn
    noise, step = noise_std(filled), float(np.median(np.abs(np.diff(filled))))
    return averaged(filled, 33) if noise > 0.1 * step else filled


def _envelope(
    record: SweptRecord, scan: ScanFit, extremes: tuple[float, float] | None
) -> tuple[Envelope, tuple[float, float]]:
    """Return the envelope to count by, and the least and greatest span along the record."""
    count = len(record.values)
    if extremes is not None:
        straight = constant_envelope(count, *extremes)
    else:
        straight = constant_envelope(count, scan.low, scan.high, scan.drift)
    # swings over most of the range first: where a mirror shakes, small ones are no fringes
    for least_swing in (0.7, 0.15):
        running = running_envelope(record.values, record.noise, least_swing)
        if running is not None and _is_near(straight, running, record.noise):
            return straight, _range(running)
    if running is None:
        return straight, _range(straight)
    return running, _range(running)


def _is_near(straight: Envelope, running: Envelope, noise: float) -> bool:
    """Return whether tops and bottoms lie on a straight envelope."""
    far = np.maximum(np.abs(running.low - straight.low), np.abs(running.high - straight.high))
    limit = 0.06 * float(straight.half_span.mean()) + 5.0 * noise
    return float(np.quantile(far, 0.98)) < limit


def _range(envelope: Envelope) -> tuple[float, float]:
    """Return the least and greatest span along a record, outliers left out."""
    spans = np.quantile(2.0 * envelope.half_span, [0.02, 0.98])
    return float(spans[0]), float(spans[1])


def _shaking(passes: list[Pass], drive: FloatArray | None) -> list[str]:
    """Return whether the mirror turns more often than a scan does."""
    if drive is not None:
        wanted, seen = len(drive_turns(drive)), len(passes) - 1
        if abs(seen - wanted) <= 1 + 0.02 * wanted:  # one at an end may be too short to count
            return []
        return [
            (
                f"the motion does not follow the drive: the mirror turns {seen} times, the drive {wanted} "
                "times; vibration is counted"
            )
        ]
    short = [one for one in passes[1:-1] if one.fringes < 1.0]
    usual = float(np.median([one.fringes for one in passes]))
    if len(short) < 2 and (len(passes) < 8 or usual > 3.0):
        return []
    return [
        (
            f"no steady scan: the mirror turns {len(passes) - 1} times, after {usual:.2g} fringes as a rule; "
            "its vibration is counted. Give the driven lines (--line), a pilot (--pilot) or the drive (--drive)"
        )
    ]


def _turned(got: Unfolded) -> Unfolded:
    """Return the same with the other sign: without a drive the record's net way is positive."""
    return replace(got, phase_rad=-got.phase_rad)


def _end_u(got: Unfolded, places: NDArray[np.int64]) -> FloatArray:
    """Return the standard uncertainty of the phase at some samples, in fringes."""
    angle = np.abs(np.sin(got.phase_rad[places]))
    cosine_u = math.hypot(got.cosine_u, 0.01)  # the extremes, too, are known to about 1 %
    near = np.minimum(cosine_u / np.maximum(angle, 1e-9), math.sqrt(2.0 * cosine_u))
    # within the band of an extreme the side is not known
    hidden = math.acos(max(1.0 - 2.0 * got.band, -1.0))
    folded = np.arcsin(np.minimum(angle, 1.0))
    near = np.where(folded < hidden, np.hypot(near, folded), near)
    return np.hypot(near / (2.0 * math.pi), _LAW_U)


def _passes(got: Unfolded, record: SweptRecord, drive: FloatArray | None) -> list[Pass]:
    """Cut the phase where the mirror turned."""
    phase = got.phase_rad
    turns = turning_points(phase, _TURN_BAND_RAD)
    while len(turns) and abs(phase[turns[0]] - phase[0]) < _END_BAND_RAD:
        turns = turns[1:]
    while len(turns) and abs(phase[turns[-1]] - phase[-1]) < _END_BAND_RAD:
        turns = turns[:-1]
    ends = np.concatenate([[0], turns, [len(phase) - 1]])
    u = _end_u(got, ends)
    # where the mirror turns next to an extreme, the way beyond the extreme may be taken for one back
    hidden = math.acos(1.0 - min(2.0 * got.band, 1.0)) / (2.0 * math.pi)
    if drive is None:  # then a turn that far from an extreme is taken for going over it
        hidden = max(hidden, _HIDDEN)
    u[1:-1] = np.hypot(u[1:-1], hidden)
    spots = slow_spots(got.turns, len(phase))
    out = []
    for k in range(len(ends) - 1):
        start, stop = int(ends[k]), int(ends[k + 1])
        unseen = np.count_nonzero((spots > start) & (spots < stop)) if drive is None else 0
        way = float(phase[stop] - phase[start])
        direction = 0 if drive is None else int(np.sign(way))
        out.append(
            Pass(
                start + record.first,
                stop + record.first,
                abs(way) / (2.0 * math.pi),
                math.hypot(u[k], u[k + 1]) + _HIDDEN * unseen,
                direction,
                fastest_of(got, start, stop),
            )
        )
    return out


def fastest_of(got: Unfolded, start: int, stop: int) -> float:
    """Return the greatest fringes per sample between two samples, over four half fringes each.

    Parameters
    ----------
    got : Unfolded
        Phase and turns.
    start, stop : int
        Samples.

    Returns
    -------
    float
        Fringes per sample.
    """
    turns = got.turns[(got.turns >= start) & (got.turns <= stop)]
    if len(turns) < 2:
        span = abs(float(got.phase_rad[stop] - got.phase_rad[start])) / (2.0 * math.pi)
        return span / max(stop - start, 1)
    over = min(4, len(turns) - 1)
    return float(np.max(0.5 * over / (turns[over:] - turns[:-over])))
