"""What reaches the photodiode channel at a line without any motion: wires, and beams that tilt.

Both add a fixed number of volts per volt of drive, in step with it. On the rising and the falling
slope they enter with opposite sign, motion with the same: that separates them. One slope alone
needs them measured (beam blocked; one arm alone) or stated.
"""

from collections.abc import Sequence
from dataclasses import dataclass
from math import inf

import numpy as np
from numpy.typing import NDArray

from calibration.line_fit import Line

__all__ = ["Additive", "additive_of"]

FloatArray = NDArray[np.float64]


@dataclass(frozen=True)
class Additive:
    """Volts on the photodiode channel per volt of the drive's reading, in step with the drive.

    ``covariance`` is that of (real, imaginary) part, ``dof`` its degrees of freedom.
    """

    ratio: complex
    covariance: FloatArray
    dof: float = inf

    def __add__(self, other: "Additive") -> "Additive":
        dof = min(self.dof, other.dof)
        return Additive(self.ratio + other.ratio, self.covariance + other.covariance, dof)

    def __neg__(self) -> "Additive":
        return Additive(-self.ratio, self.covariance, self.dof)


def additive_of(
    pickup: Sequence[Line], blocked_x: Sequence[Line], blocked_y: Sequence[Line]
) -> Additive | None:
    """Return all that adds to a line without motion, as far as it was measured.

    Parameters
    ----------
    pickup, blocked_x, blocked_y : sequence of Line
        The same line in recordings with the beam blocked, and with one arm alone, drive on.

    Returns
    -------
    Additive or None
        Wires alone, or wires and both beams' tilt (each single-arm recording holds the wires too,
        which are then counted once); None if nothing was measured.
    """
    wires = _mean(pickup)
    arms = [arm for arm in (_mean(blocked_x), _mean(blocked_y)) if arm is not None]
    if wires is None:
        return arms[0] if arms else None
    total = wires
    for arm in arms:
        total = total + arm + -wires
    return total


def _mean(lines: Sequence[Line]) -> Additive | None:
    ratios = [line.ratio for line in lines if line.ratio is not None]
    if not ratios:
        return None
    return Additive(
        ratio=complex(np.mean([ratio.phasor for ratio in ratios])),
        covariance=np.sum([ratio.covariance for ratio in ratios], axis=0) / len(ratios) ** 2,
        dof=float(np.sum([ratio.dof for ratio in ratios])),
    )
