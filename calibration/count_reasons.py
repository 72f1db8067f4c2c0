"""Reasons not to trust a count of fringes."""

import numpy as np
from numpy.typing import NDArray

from calibration.envelope import Envelope
from calibration.scan import ScanFit
from calibration.swept_record import SweptRecord
from calibration.unfolding import Unfolded

__all__ = ["count_reasons"]

FloatArray = NDArray[np.float64]

_FASTEST = 1.0 / 3.0  # fringes per sample; at one half the direction is lost
_EVEN = 0.85  # least span over greatest
_MOST_UNEVEN = 0.1  # of cos φ
_MOST_NOISE = 0.08  # of cos φ: the band would be above a quarter of the span


def _lost_in_gaps(record: SweptRecord, got: Unfolded) -> list[str]:
    """Return how many gaps are too long for the phase to be carried over them."""
    if not len(record.gaps):
        return []
    legs = np.concatenate([[0], got.swings, [len(record.values) - 1]])
    before = np.searchsorted(legs, record.gaps[:, 0], side="right") - 1
    ends = record.gaps[:, 0] + record.gaps[:, 1]
    # the leg that holds a gap is stretched by it: its neighbours say how fast the fringes went
    length = np.diff(legs).astype(float)
    near = np.minimum(
        length[np.clip(before - 1, 0, len(length) - 1)],
        length[np.clip(before + 1, 0, len(length) - 1)],
    )
    usual = float(np.median(length))
    long = record.gaps[:, 1] > 0.66 * np.maximum(near, np.minimum(0.3 * usual, length[before]))
    if not long.any():
        return []
    worst = int(np.argmax(np.where(long, ends - record.gaps[:, 0], 0)))
    return [
        (
            f"{int(long.sum())} gaps are longer than a third of a fringe (the longest, at sample "
            f"{record.first + int(record.gaps[worst, 0])}, has {int(record.gaps[worst, 1])} samples): "
            "fringes are lost in them"
        )
    ]


def _too_fast(got: Unfolded) -> list[str]:
    """Return whether the fringes went by too fast for the sampling."""
    if len(got.swings) < 3:
        return []
    over = min(4, len(got.swings) - 1)
    speeds = 0.5 * over / (got.swings[over:] - got.swings[:-over])
    if float(speeds.max()) <= _FASTEST:
        return []
    return [
        (
            f"sampled too slowly: up to {float(speeds.max()):.2g} fringes pass in a sample, a third is the "
            "limit; faster ones would be taken for slower ones"
        )
    ]


def _drive_jumps(got: Unfolded, drive: FloatArray | None) -> list[str]:
    """Return whether the drive leaps so far in a sample that the fringes of the leap are not seen."""
    if drive is None or len(got.turns) < 3:
        return []
    moved = np.abs(np.diff(drive))
    # fringes per unit of drive where both move steadily
    places = got.turns[:: max(len(got.turns) // 200, 1)]
    way = np.abs(np.diff(drive[places]))
    if not np.any(way > 0.0):
        return []
    scale = float(np.median(np.abs(np.diff(got.phase_rad[places]))[way > 0.0] / way[way > 0.0]))
    usual = 10.0 * float(np.quantile(moved, 0.95)) + 0.02 * float(np.ptp(drive))
    leaps = (moved > usual) & (moved * scale / (2.0 * np.pi) > _FASTEST)
    if not leaps.any():
        return []
    worst = int(np.argmax(np.where(leaps, moved, 0.0)))
    return [
        (
            f"sampled too slowly: at {int(leaps.sum())} samples, first at {int(np.flatnonzero(leaps)[0])}, the "
            f"drive leaps by up to {moved[worst] * scale / (2.0 * np.pi):.2g} fringes in a sample, which are "
            "not seen"
        )
    ]


def _short_swings(record: SweptRecord, envelope: Envelope, got: Unfolded) -> list[str]:
    """Return whether the record mostly swings over less than the span of a fringe."""
    swing = np.abs(np.diff(envelope.cosine(record.values)[got.swings]))
    if len(swing) < 6:
        return []
    share = float(swing[swing < 1.2].sum() / swing.sum())
    if share <= 0.4:
        return []
    return [
        (
            f"no scan: {share:.0%} of the way is in swings over less than 60 % of the fringe's span; the mirror "
            "vibrates about a working point. Give the driven lines (--line) or a pilot (--pilot)"
        )
    ]


def _uneven(record: SweptRecord, envelope: Envelope, span_range: tuple[float, float]) -> list[str]:
    out = []
    if span_range[0] < _EVEN * span_range[1]:
        out.append(
            f"the fringe's amplitude is too uneven: its span goes from {span_range[0]:.4g} to "
            f"{span_range[1]:.4g}; low, high and fractions of a fringe hold for no single fringe, and "
            "where it is small fringes may be missing"
        )
    beyond = np.abs(envelope.cosine(record.values)) > 1.2 + 5.0 * record.noise / envelope.half_span
    share = float(np.mean(beyond))
    if share > 0.002:
        out.append(
            f"the level jumps: {share:.1%} of the samples lie far beyond the fringe's extremes about them"
        )
    return out


def count_reasons(
    values: FloatArray,
    record: SweptRecord,
    envelope: Envelope,
    got: Unfolded,
    scan: ScanFit | None,
    span_range: tuple[float, float],
    drive: FloatArray | None = None,
) -> list[str]:
    """Return why a count must not be trusted.

    Parameters
    ----------
    values : ndarray, shape (n,)
        The record as it came.
    record : SweptRecord
        The record as it was counted.
    envelope : Envelope
        Extremes it was counted by.
    got : Unfolded
        Phase and turns.
    scan : ScanFit or None
        Extremes found in the record; None where they were given.
    span_range : tuple of float
        Least and greatest span of the fringe.
    drive : ndarray, shape (n,), optional
        What moves the mirror, beside the record as it was counted.

    Returns
    -------
    list of str
        One line each; empty where nothing was found.
    """
    reasons = _too_fast(got)
    fast = bool(reasons)
    reasons += _drive_jumps(got, drive)
    reasons += _short_swings(record, envelope, got)
    if got.uneven > _MOST_UNEVEN:
        reasons.append(
            f"the fringe's tops and bottoms scatter by {got.uneven:.1%} of half its span from one to the "
            f"next, {_MOST_UNEVEN:.0%} is the limit: lamp light, mains or power noise lies on top"
        )
    reasons += _lost_in_gaps(record, got) + _uneven(record, envelope, span_range)
    if got.cosine_u > _MOST_NOISE:
        reasons.append(
            f"too noisy to count: the noise is {got.cosine_u:.2g} of half the fringe's span, "
            f"{_MOST_NOISE:g} is the limit"
        )
    if record.spikes > 2 + 1e-3 * len(values):
        reasons.append(f"{record.spikes} lone samples far off their neighbours were left out")
    if got.against_drive > 0.15:
        reasons.append(
            f"the motion does not follow the drive: {got.against_drive:.0%} of the way went "
            "against it"
        )
    missed, turns = got.unfollowed
    if missed > max(1, 0.2 * turns):
        reasons.append(
            f"the motion does not follow the drive: at {missed} of {turns} of its turns the fringes go on"
        )
    if scan is not None:
        reasons += [reason for reason in scan.reasons if not (fast and "not sharp" in reason)]
    return reasons
