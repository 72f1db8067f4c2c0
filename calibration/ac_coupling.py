"""AC coupling: a scan whose level sinks back to its mean where the fringes go by slowly.

A capacitor in the way leaves of a level what is faster than its time constant τ: dy/dt = dv/dt + v/τ, so
that the light itself is v + ∫v dt/τ. Where that makes the tops and bottoms of a scan even, it was there.
"""

import numpy as np
from numpy.typing import NDArray

from calibration.swept_record import SweptRecord
from calibration.unfolding import Unfolded

__all__ = ["ac_reasons"]

FloatArray = NDArray[np.float64]

_LEAST = 0.03  # of the span: what the sinking must amount to
_BETTER = 0.6  # of the scatter of tops and bottoms that may be left
_MOST_TURNS = 20_000
_SYMMETRIC = 0.1  # of the span: so near zero lies the middle of a fringe behind a capacitor


def _left(columns: FloatArray, levels: FloatArray) -> tuple[FloatArray, float]:
    """Return the solution by least squares, gross outliers left out, and the robust scatter left."""
    used = np.ones(len(levels), dtype=bool)
    for _ in range(3):
        solved = np.linalg.lstsq(columns[used], levels[used], rcond=None)[0]
        off = np.abs(levels - columns @ solved)
        used = off <= 4.0 * max(float(np.median(off)), 1e-300)
    return np.asarray(solved, dtype=float), float(np.sqrt(np.mean(off[used] ** 2)))


def _sinks_about_zero(record: SweptRecord, got: Unfolded) -> bool:
    """Return whether the slow fringes at both ends of a record about zero lie closer to zero."""
    turns, count = got.swings, len(record.values)
    levels = record.values[turns]
    if not (np.any(levels < 0.0) and np.any(levels >= 0.0)):
        return False
    low, high = np.median(levels[levels < 0.0]), np.median(levels[levels >= 0.0])
    span = float(high - low)
    mean = abs(float(record.values.mean()))
    # a mean of nothing at all was taken off afterwards
    if not (abs(high + low) < _SYMMETRIC * span and mean > 1e-5 * span):
        return False
    legs = np.diff(np.concatenate([[0], turns, [count - 1]]))
    slow = legs[:-1] + legs[1:] > 3.0 * float(np.median(legs))
    short = 1.0 - np.abs(levels) / np.where(levels > 0.0, high, -low)
    sunk = slow & (short > 0.08 + 8.0 * record.noise / span)
    # one of them may be a turn of the mirror next to an extreme; a motor starts and stops slowly
    return bool(np.any(sunk[:3]) and np.any(sunk[-3:]))


def ac_reasons(record: SweptRecord, got: Unfolded) -> list[str]:
    """Return whether the record looks AC-coupled.

    Parameters
    ----------
    record : SweptRecord
        As it was counted.
    got : Unfolded
        Phase and turns.

    Returns
    -------
    list of str
        One line; empty where nothing was found.
    """
    turns = got.swings[:_MOST_TURNS]
    if len(turns) < 10:
        return []
    values = record.values[: int(turns[-1]) + 1]
    gone = np.cumsum(values - values.mean())[turns] / len(values)
    levels = values[turns]
    top = np.diff(levels, prepend=levels[1]) > 0.0
    when = turns / len(values) - 0.5
    plain = np.stack([top, ~top, when], axis=1).astype(float)
    _, without = _left(plain, levels)
    solved, left = _left(np.column_stack([plain, gone]), levels)
    span = float(solved[0] - solved[1])
    if _sinks_about_zero(record, got):
        why = (
            "the level swings about zero, where the fringes slow down their tops come closer to it"
        )
        return [f"AC-coupled: {why}: record with DC coupling"]
    own = gone - plain @ np.linalg.lstsq(plain, gone, rcond=None)[0]
    sunk = -float(solved[3]) * float(np.ptp(own)) / max(span, 1e-300)
    if span <= 0.0 or sunk < _LEAST or left > _BETTER * without:
        return []
    tau = -len(values) / float(solved[3])
    return [
        (
            f"AC-coupled: the level sinks by up to {sunk:.0%} of the fringe's span where the fringes slow "
            f"down, as behind a capacitor with a time constant of {tau:.3g} samples: record with DC coupling"
        )
    ]
