"""One line in free-running recordings, per volt of the drive's reading.

While a bench passes both slopes, what adds to the photodiode in step with the drive pushes the phase one
way and then the other. A line reads A + p·⟨1/sin φ⟩/swing: A is motion, p what adds, and the mean next to
nothing where both slopes were passed alike.
"""

from collections.abc import Sequence
from dataclasses import dataclass, replace

import numpy as np

from calibration.free_record import FreeMeans
from calibration.pickup import Additive
from calibration.slope_line import CombinedLine, SlopeLine
from calibration.working_point import SlopeMeans

__all__ = ["FreeLine", "combine_free"]

_NEXT_TO_NOTHING = (
    1e-9  # rad a volt: an additive weight of zero would mean that both slopes were measured
)


@dataclass(frozen=True)
class FreeLine:
    """A line fitted in one free-running recording.

    Parameters
    ----------
    line : SlopeLine
        Ratio, covariance and averages; its slope says ``"both"``.
    means : FreeMeans
        Averages over the inverted samples.
    """

    line: SlopeLine
    means: FreeMeans


def combine_free(
    parts: Sequence[FreeLine], swing_v: float, additive: Additive | None
) -> CombinedLine:
    """Return the motion of a line from free-running recordings.

    Parameters
    ----------
    parts : sequence of FreeLine
        The same line, one recording and more.
    swing_v : float
        Half of high − low, in the recording's unit.
    additive : Additive, optional
        What adds to the photodiode, from other recordings.

    Returns
    -------
    CombinedLine
        Weighted by the recordings' variances.
    """
    inverse = np.array([1.0 / max(float(np.trace(p.line.covariance)), 1e-300) for p in parts])
    weights = (inverse / inverse.sum()).tolist()
    pairs = list(zip(weights, parts, strict=True))
    pushed = sum(w * p.means.signed_inverse_sin for w, p in pairs) / swing_v
    names = ("cos", "cot", "inverse_sin", "inverse_sin2", "cos_over_sin2")
    means = {name: sum(w * getattr(p.means.means, name) for w, p in pairs) for name in names}
    combined = CombinedLine(
        ratio=complex(sum(w * p.line.ratio for w, p in pairs)),
        parts=tuple((w**2 * p.line.covariance, p.line.dof) for w, p in pairs),
        weights=tuple(weights),
        means=SlopeMeans(**means),
        records=tuple(p.means.means for p in parts),
        tilt_weight=-sum(w * p.means.signed_cot for w, p in pairs),
        additive=additive,
        additive_weight=pushed if abs(pushed) > _NEXT_TO_NOTHING else _NEXT_TO_NOTHING,
        cosines=tuple(level for p in parts for level in p.means.cosines),
    )
    if additive is None:
        return combined
    return replace(combined, ratio=combined.ratio + combined.additive_weight * additive.ratio)
