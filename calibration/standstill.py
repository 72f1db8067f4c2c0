"""Standstill: stretches of a scan in which no fringe passes, and whether the light was off there."""

import numpy as np
from numpy.typing import NDArray

from calibration.driven_way import drive_turns
from calibration.envelope import Envelope
from calibration.half_fringes import half_fringe_samples
from calibration.swept_record import SweptRecord
from calibration.unfolding import Unfolded

__all__ = ["standing_reasons", "standing_stretches"]

FloatArray = NDArray[np.float64]

_LEAST = 12  # samples of a block that may be called flat
_FLAT = 0.1  # of cos φ: 3° at mid-fringe
_DARK = 0.97  # of half the span below the middle: where the dark is at full contrast
_FEW = 8  # samples a half fringe below which a jump is no more than a fringe that goes by


def standing_stretches(cosine: FloatArray, block: int, spread: float) -> NDArray[np.int64]:
    """Return where a level stands still for two blocks and more.

    Parameters
    ----------
    cosine : ndarray, shape (n,)
        cos φ.
    block : int
        Samples of a block.
    spread : float
        By how much it may range within a block.

    Returns
    -------
    ndarray of int, shape (k, 2)
        First sample and the one after the last, to a sample.
    """
    whole = len(cosine) // block
    if whole < 2:
        return np.zeros((0, 2), dtype=np.int64)
    blocks = cosine[: whole * block].reshape(whole, block)
    levels = np.median(blocks, axis=1)
    flat = np.ptp(blocks, axis=1) < spread
    edges = np.flatnonzero(np.diff(flat.astype(np.int8), prepend=0, append=0)).reshape(-1, 2)
    out = []
    for first, stop in edges.tolist():
        if stop - first < 2 or np.ptp(levels[first:stop]) > spread:
            continue
        level = float(np.median(levels[first:stop]))
        off = np.abs(cosine - level) > 0.75 * spread
        before, after = off[: first * block][::-1], off[stop * block :]
        start = first * block - (int(np.argmax(before)) if before.any() else len(before))
        end = stop * block + (int(np.argmax(after)) if after.any() else len(after))
        out.append((start, end))
    return np.array(out, dtype=np.int64).reshape(-1, 2)


def _jump(cosine: FloatArray, at: int) -> float:
    """Return how far the level leaps at a sample, from three samples before to three after."""
    if at < 4 or at > len(cosine) - 4:
        return 0.0
    return abs(float(np.median(cosine[at + 1 : at + 4]) - np.median(cosine[at - 4 : at - 1])))


def _moved_on(got: Unfolded, drive: FloatArray | None, start: int, end: int, half: float) -> bool:
    """Return whether the drive moves meanwhile by what is a fringe elsewhere.

    Where the drive has just turned, a screw takes up its backlash, and the mirror does stand.
    """
    if drive is None or np.any(np.abs(drive_turns(drive) - start) < 3.0 * half):
        return False
    way = float(np.abs(np.diff(drive[got.swings])).sum())
    fringes = 0.5 * max(len(got.swings) - 1, 1)
    return way > 0.0 and float(np.ptp(drive[start:end])) * fringes / way > 1.0


def standing_reasons(
    values: FloatArray,
    record: SweptRecord,
    envelope: Envelope,
    got: Unfolded,
    drive: FloatArray | None,
) -> list[str]:
    """Return whether the level stands in a way that no resting mirror explains.

    Parameters
    ----------
    values : ndarray, shape (n,)
        The record as it came, from ``record.first`` on; NaN where samples are missing.
    record : SweptRecord
        The record as it was counted.
    envelope : Envelope
        Extremes it was counted by.
    got : Unfolded
        Phase and turns.
    drive : ndarray, shape (n,), or None
        What moves the mirror.

    Returns
    -------
    list of str
        One line; empty where nothing was found.

    Notes
    -----
    A mirror at rest stands anywhere and comes to rest; a beam that is blocked leaps, to a level that is
    beyond the fringe, or at its very end where the dark is.
    """
    if len(got.swings) < 6:
        return []
    count = len(record.values)
    half = float(np.median(half_fringe_samples(got.swings, got.swings, count)))
    cosine = envelope.cosine(record.values)
    raw = envelope.cosine(np.where(np.isfinite(values), values, record.values))
    spread = _FLAT + 8.0 * got.cosine_u
    if spread > 0.8:
        return []
    suspect, below = [], -1.0 if float(np.median(record.values)) > 0.0 else 1.0
    for start, end in standing_stretches(cosine, max(int(1.5 * half), _LEAST), spread).tolist():
        level = float(np.median(cosine[start:end]))
        leap = 0.3 + 8.0 * np.pi / half + 8.0 * got.cosine_u
        leaps = half > _FEW and max(_jump(raw, start), _jump(raw, end)) > leap
        legs = np.diff(got.swings[got.swings <= start])[-3:]
        abrupt = len(legs) > 2 and start - got.swings[got.swings <= start][-1] < 2.0 * half
        abrupt = abrupt and float(legs.max()) < 1.5 * half
        why = "the drive moves on meanwhile" if _moved_on(got, drive, start, end, half) else ""
        if leaps:
            why = why or "it gets there, or away, in a leap"
        if abrupt and below * level > _DARK and drive is None:
            why = why or "it is the fringe's darkest and got there without slowing down"
        if why:
            suspect.append((start, end, float(np.median(record.values[start:end])), why))
    if not suspect:
        return []
    start, end, at, why = max(suspect, key=lambda one: one[1] - one[0])
    return [
        (
            f"no fringes pass from sample {record.first + start} to {record.first + end}, where the level "
            f"stands at {at:.4g} and {why}: laser off, beam blocked, detector saturated or the mirror held; "
            "count what is good with --from and --to"
        )
    ]
