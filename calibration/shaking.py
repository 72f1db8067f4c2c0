"""Shaking: vibration that turns a mirror more often than a scan does."""

import numpy as np
from numpy.typing import NDArray

from calibration.fringe_pass import Pass
from calibration.unfolding import drive_turns

__all__ = ["shaking_reasons"]

FloatArray = NDArray[np.float64]


def shaking_reasons(passes: list[Pass], drive: FloatArray | None) -> list[str]:
    """Return whether the mirror turns more often than a scan does.

    Parameters
    ----------
    passes : list of Pass
        As counted.
    drive : ndarray, shape (n,), or None
        What moves the mirror.

    Returns
    -------
    list of str
        One line, or none.
    """
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
