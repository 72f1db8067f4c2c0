"""The drive beside the fringes: where it turns, which way it goes, whether the mirror follows it."""

import numpy as np
from numpy.typing import NDArray

from calibration.half_fringes import slow_spots
from calibration.smoother import noise_std
from calibration.turning_points import turning_points

__all__ = ["against_drive", "drive_turns", "driven_sides", "unfollowed_turns"]

FloatArray = NDArray[np.float64]

_VIBRATION_RAD = 1.0  # a way back of less is no way against the drive
_LEAST_TURN = 0.38  # of cos φ: from |cos φ| = 0.6 to the next extreme, vibration of 0.19 rad below
_LATE = 0.12  # of the drive's way between two turns: so much later the mirror may turn
_AT_EXTREME = 0.85


def drive_turns(drive: FloatArray) -> NDArray[np.int64]:
    """Return where a drive turns, noise and small steps left out.

    Parameters
    ----------
    drive : ndarray, shape (n,)
        What moves the mirror, any unit.

    Returns
    -------
    ndarray of int, shape (k,)
        Samples.
    """
    band = max(0.02 * float(np.ptp(drive)), 7.0 * noise_std(drive)) + 1e-12
    return turning_points(drive, band)


def unfollowed_turns(drive: FloatArray | None, level: FloatArray, band: float) -> tuple[int, int]:
    """Return how many turns of the drive the mirror does not follow, and how many could be seen.

    Parameters
    ----------
    drive : ndarray, shape (n,), or None
        What moves the mirror.
    level : ndarray, shape (n,)
        cos φ.
    band : float
        Least swing that stands out of the noise.

    Returns
    -------
    tuple of int
        Turns well within a leg of the fringe, and all that lie away from its extremes; next to one a
        turn of the mirror may not show. A mirror that turns a little later than the drive follows it.
    """
    turns = turning_points(level, max(band, _LEAST_TURN))
    if drive is None or len(turns) < 2:
        return 0, 0
    driven = drive_turns(drive)
    legs = np.diff(np.concatenate([[0], driven, [len(drive) - 1]]))
    late = _LATE * np.minimum(legs[:-1], legs[1:])
    seen = np.abs(level[driven]) < 0.6
    driven, late = driven[seen], late[seen]
    after = np.clip(np.searchsorted(turns, driven), 1, len(turns) - 1)
    leg = turns[after] - turns[after - 1]
    off = np.minimum(np.abs(turns[after] - driven), np.abs(driven - turns[after - 1]))
    away = np.abs(level[turns]) < _AT_EXTREME
    own = turns[
        away | np.isin(turns, slow_spots(turns, len(level)))
    ]  # or so slowly over an extreme
    near = np.searchsorted(own, driven + late, "right") > np.searchsorted(own, driven - late)
    return int(np.count_nonzero((off > 0.3 * leg) & ~near)), len(driven)


def driven_sides(bounds: NDArray[np.int64], angle: FloatArray, drive: FloatArray) -> FloatArray:
    """Return the side of each stretch as the drive has it.

    Parameters
    ----------
    bounds : ndarray of int, shape (k + 1,)
        Samples between which the stretches lie.
    angle : ndarray, shape (n,)
        arccos of the level [rad].
    drive : ndarray, shape (n,)
        What moves the mirror.

    Returns
    -------
    ndarray, shape (k,)
        From −1 to 1; 0 where the drive does not move. A stretch in which the drive itself turns counts
        by where most of the angle was gone through; 1 is a way over all the angles that occur in it.
    """
    span = float(np.ptp(drive))
    turns = drive_turns(drive)
    ways = np.sign(np.diff(drive[np.concatenate([[0], turns, [len(drive) - 1]])]))
    way = ways[np.searchsorted(turns, np.arange(len(drive) - 1), side="right")]
    if span <= 0.0:
        way = np.zeros(len(drive) - 1)
    moved = np.concatenate([[0.0], np.cumsum(way * np.diff(angle))])
    starts = np.minimum(bounds[:-1], len(angle) - 1)
    most, least = np.maximum.reduceat(angle, starts), np.minimum.reduceat(angle, starts)
    reach = np.maximum(most, angle[bounds[1:]]) - np.minimum(least, angle[bounds[1:]])
    return np.asarray(np.clip(np.diff(moved[bounds]) / np.maximum(reach, 1e-12), -1.0, 1.0))


def against_drive(phase_rad: FloatArray, drive: FloatArray | None) -> float:
    """Return the share of the way that went against the drive, small vibration left out.

    Parameters
    ----------
    phase_rad : ndarray, shape (n,)
        Phase [rad].
    drive : ndarray, shape (n,), or None
        What moves the mirror.

    Returns
    -------
    float
        0 without a drive.
    """
    if drive is None:
        return 0.0
    turns = np.union1d(turning_points(phase_rad, _VIBRATION_RAD), drive_turns(drive))
    ends = np.concatenate([[0], turns, [len(phase_rad) - 1]])
    way, driven = np.diff(phase_rad[ends]), np.diff(drive[ends])
    against = np.abs(way)[way * driven < 0.0]
    return float(against.sum() / max(np.abs(way).sum(), 1e-12))
