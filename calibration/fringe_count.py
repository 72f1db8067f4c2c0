"""Counting fringes: how far a swept mirror went, pass by pass, in fringes.

A fringe is 2π of phase. The count is the phase that the record went through, fractions at both ends
of a pass included, after ISO 16063-11, method 1, and for scans. False counts from noise and vibration
are kept out by a band of hysteresis.
"""

import math
from dataclasses import dataclass, field, replace

import numpy as np
from numpy.typing import NDArray

from calibration.ac_coupling import ac_reasons
from calibration.count_reasons import count_reasons
from calibration.errors import CalibrationError
from calibration.fringe_pass import Pass, cut_passes, end_u
from calibration.scan import ScanFit, fit_scan
from calibration.shaking import shaking_reasons
from calibration.smoother import noise_std
from calibration.standstill import standing_reasons
from calibration.swept_envelope import envelope_of
from calibration.swept_record import averaged, ready_to_count
from calibration.unfolding import Unfolded, unfold_fringe

__all__ = ["FringeCount", "count_fringes"]

FloatArray = NDArray[np.float64]


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
    envelope, span_range = envelope_of(record, scan, extremes)
    got = unfold_fringe(record.values, envelope, record.noise, along)
    if drive is None and len(got.phase_rad) and got.phase_rad[-1] < got.phase_rad[0]:
        got = _turned(got)
    passes = cut_passes(got, record.first, along)
    phase = np.full(len(values), np.nan)
    phase[record.first : stop] = got.phase_rad
    phase[~np.isfinite(values)] = np.nan
    ends = end_u(got, np.array([0, len(record.values) - 1]))
    return FringeCount(
        scan,
        passes,
        phase,
        float(got.phase_rad[-1] - got.phase_rad[0]) / (2.0 * math.pi),
        _net_u(ends, passes, drive is not None),
        span_range,
        record.spikes,
        count_reasons(
            values, record, envelope, got, scan if extremes is None else None, span_range, along
        )
        + shaking_reasons(passes, got, envelope.cosine(record.values), along)
        + ac_reasons(record, got)
        + standing_reasons(values[record.first : stop], record, envelope, got, along),
    )


def _net_u(ends: FloatArray, passes: list[Pass], has_drive: bool) -> float:
    """Return the standard uncertainty of the net way.

    With a drive a turn that hides next to an extreme takes as much from the pass before it as from the
    pass after, and cancels; without one the passes between may be taken for others.
    """
    both = math.hypot(*ends.tolist())
    return both if has_drive else both + math.fsum(one.fringes_u for one in passes)


def _bridged(drive: FloatArray) -> FloatArray:
    good = np.flatnonzero(np.isfinite(drive))
    if len(good) < 2:
        raise CalibrationError("the drive has no samples where the photodiode has")
    filled = np.interp(np.arange(len(drive)), good, drive[good])
    # where noise hides the steps of the drive, so does it the moment of its turn
    noise, step = noise_std(filled), float(np.median(np.abs(np.diff(filled))))
    if noise <= 0.1 * step:
        return filled
    # until what is left stays within a hundredth of the drive's range, from peak to peak
    needed = 2.25 * (9.0 * noise / max(0.01 * float(np.ptp(filled)), 1e-300)) ** 2
    return averaged(filled, 2 * int(min(max(needed, 33.0), max(len(filled) / 100.0, 33.0)) / 2) + 1)


def _turned(got: Unfolded) -> Unfolded:
    """Return the same with the other sign: without a drive the record's net way is positive."""
    return replace(got, phase_rad=-got.phase_rad)
