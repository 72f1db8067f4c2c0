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

    ``covariance`` is that of (real, imaginary) part, ``dof`` its degrees of freedom; ``lacks`` names
    what was not measured and is not in it: ``"wires"``, ``"tilt x"``, ``"tilt y"``.
    """

    ratio: complex
    covariance: FloatArray
    dof: float = inf
    lacks: frozenset[str] = frozenset()


def additive_of(
    pickup: Sequence[Line], blocked_x: Sequence[Line], blocked_y: Sequence[Line]
) -> Additive | None:
    """Return all that adds to a line without motion, as far as it was measured.

    Parameters
    ----------
    pickup, blocked_x, blocked_y : sequence of Line
        The same line in recordings with the beam blocked, and with one arm blocked, drive on.

    Returns
    -------
    Additive or None
        The sum of wires and both beams' tilt. Each single-arm recording holds the wires too, which
        are counted once. None if nothing was measured.
    """
    wires = _mean(pickup)
    arms = {"tilt y": _mean(blocked_x), "tilt x": _mean(blocked_y)}
    seen = [arm for arm in arms.values() if arm is not None]
    lacks = {name for name, arm in arms.items() if arm is None}
    if wires is not None:
        parts = [(1.0 - len(seen), wires), *((1.0, arm) for arm in seen)]
    elif seen:
        parts = [(1.0, arm) for arm in seen]
        lacks |= {"wires"} if len(seen) > 1 else set()  # two arms hold them twice, one arm once
    else:
        return None
    return Additive(
        ratio=complex(sum(weight * part.ratio for weight, part in parts)),
        covariance=np.asarray(sum(weight**2 * part.covariance for weight, part in parts)),
        dof=min(part.dof for _, part in parts),
        lacks=frozenset(lacks),
    )


def _mean(lines: Sequence[Line]) -> Additive | None:
    ratios = [line.ratio for line in lines if line.ratio is not None]
    if not ratios:
        return None
    return Additive(
        ratio=complex(np.mean([ratio.phasor for ratio in ratios])),
        covariance=np.sum([ratio.covariance for ratio in ratios], axis=0) / len(ratios) ** 2,
        dof=float(np.sum([ratio.dof for ratio in ratios])),
    )
