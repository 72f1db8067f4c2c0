"""The fringe's shape: how its law departs from a cosine, per direction and per fringe, and why."""

from dataclasses import dataclass, field
from typing import Any

import numpy as np
from numpy.typing import NDArray

from calibration.fringe_law import law_stretches, student_width, typical_law

__all__ = ["DirectionShape", "FringeShape", "fringe_shape"]

FloatArray = NDArray[np.float64]

_CLEAR = 0.01  # a harmonic of the law is named above this, three standard uncertainties allowed for
_BESIDE = 7  # stretches on either side of a step; they overlap by two thirds
_STEP = 8.0  # robust standard deviations by which a jump of tops or bottoms stands out


@dataclass(frozen=True)
class DirectionShape:
    """Harmonics of the fringe law in one direction of the motion, relative to cos φ.

    Attributes
    ----------
    direction : str
        "up", "down", or "unknown".
    second, third, lean : float
        cos 2φ, cos 3φ, and sin 2φ with φ growing in time.
    second_u, third_u, lean_u : float
        Standard uncertainties from the scatter between stretches.
    stretches : int
        Stretches of one and a half fringes looked at.
    """

    direction: str
    second: float
    third: float
    lean: float
    second_u: float
    third_u: float
    lean_u: float
    stretches: int

    def to_dict(self) -> dict[str, Any]:
        """Return the JSON form.

        Returns
        -------
        dict
            Plain values.
        """
        out: dict[str, Any] = {"direction": self.direction, "stretches": self.stretches}
        for name in ("second", "third", "lean"):
            value, u = getattr(self, name), getattr(self, f"{name}_u")
            out[name] = {"value": value, "unit": "1", "u": u}
        return out


@dataclass(frozen=True)
class FringeShape:
    """The law of a scanned fringe.

    Attributes
    ----------
    directions : list of DirectionShape
        One for each direction in which there are fringes enough.
    fringes : ndarray, shape (k, 5)
        Of single stretches of one and a half fringes: first sample, end, cos 2φ, cos 3φ, sin 2φ.
    causes : list of str
        What departs from a cosine by more than 1 %, with the likely causes.
    """

    directions: list[DirectionShape]
    fringes: FloatArray
    causes: list[str] = field(default_factory=list)

    def to_dict(self) -> dict[str, Any]:
        """Return the JSON form.

        Returns
        -------
        dict
            Plain values.
        """
        return {
            "directions": [one.to_dict() for one in self.directions],
            "fringes": {
                "first_sample": self.fringes[:, 0].astype(int).tolist(),
                "second": self.fringes[:, 2].tolist(),
                "third": self.fringes[:, 3].tolist(),
                "lean": self.fringes[:, 4].tolist(),
            },
            "causes": self.causes,
        }


def _direction_shapes(stretches: FloatArray, ways: NDArray[np.int64]) -> list[DirectionShape]:
    out = []
    for way, name in ((1, "up"), (-1, "down"), (0, "unknown")):
        own = stretches[ways == way]
        typical, u, good = typical_law(own)
        if len(typical):
            second, third, lean = typical.tolist()
            u = student_width(good) * u
            out.append(DirectionShape(name, second, third, lean, u[0], u[1], u[2], len(own)))
    return out


def _clear(value: float, u: float) -> bool:
    return abs(value) - 3.0 * u > _CLEAR


def _harmonic_causes(one: DirectionShape, clipped: bool) -> list[str]:  # private
    """Name what makes cos 2φ and cos 3φ of a law."""
    out = []
    where = "" if one.direction == "unknown" else f" going {one.direction}"
    second, third = _clear(one.second, one.second_u), _clear(one.third, one.third_u)
    if second or third:
        if clipped:
            cause = "clipping"
        elif second and not third:
            cause = "a ghost beam" if one.second > 0.0 else "a ghost beam or saturation"
        elif second:
            cause = "saturation, clipping or a ghost beam"
        else:
            cause = "clipping at both ends, feedback or a ghost beam"
        out.append(
            f"the fringe is no cosine{where}: cos 2φ {one.second:+.1%} (u = {one.second_u:.1%}), cos 3φ "
            f"{one.third:+.1%} (u = {one.third_u:.1%}); likely causes: {cause}"
        )
    return out


def _lean_causes(shapes: list[DirectionShape]) -> list[str]:
    """Name what makes a fringe lean."""
    leaning = [one for one in shapes if _clear(one.lean, one.lean_u)]
    if not leaning:
        return []
    both = {one.direction: one.lean for one in shapes}
    if "up" in both and "down" in both:
        opposite = both["up"] * both["down"] < 0.0
        cause = "feedback into the laser" if opposite else "a slow detector or amplifier"
    else:
        cause = "feedback into the laser, or a slow detector; a scan in the other direction tells"
    sizes = ", ".join(f"{one.lean:+.1%} (u = {one.lean_u:.1%})" for one in leaning)
    return [f"the fringe leans: sin 2φ {sizes}; likely cause: {cause}"]


def _step_causes(values: FloatArray, stretches: FloatArray) -> list[str]:
    """Name lasting changes of tops or bottoms from one stretch to the next."""
    if len(stretches) < 4 * _BESIDE:
        return []
    out = []
    for name, pick in (("top", np.max), ("bottom", np.min)):
        ends = np.array([pick(values[int(a) : int(b)]) for a, b in stretches[:, :2]])
        # medians over some on either side: a turn of the mirror in one stretch is no step
        windows = np.median(np.lib.stride_tricks.sliding_window_view(ends, _BESIDE), axis=1)
        jumps = windows[_BESIDE:] - windows[:-_BESIDE]
        usual = 1.4826 * float(np.median(np.abs(jumps - np.median(jumps))))
        worst = int(np.argmax(np.abs(jumps)))
        least = max(_STEP * usual, 0.05 * float(np.ptp(values)))
        if abs(jumps[worst]) > least:
            out.append(
                f"the fringe's {name} jumps by {jumps[worst]:.3g} near sample "
                f"{int(stretches[worst + _BESIDE, 0])}; likely causes: a mode hop of the laser, or a knock"
            )
    return out


def fringe_shape(
    values: FloatArray,
    passes: NDArray[np.int64],
    low: float,
    high: float,
    direction: NDArray[np.int64],
    *,
    clipped: bool = False,
) -> FringeShape:
    """Return the harmonics of a scanned fringe's law, per direction and per fringe.

    Parameters
    ----------
    values : ndarray, shape (n,)
        Scan over whole fringes, no NaN.
    passes : ndarray of int, shape (n,)
        Number of the pass over an extreme that each sample belongs to.
    low, high : float
        Extremes, in the scan's unit.
    direction : ndarray of int, shape (n,)
        1, −1 or 0 (unknown) at each sample.
    clipped : bool, optional
        Whether samples pile up at an end.

    Returns
    -------
    FringeShape
        Harmonics and likely causes of what is above 1 %.

    Notes
    -----
    Saturation flattens the top: cos 2φ below zero. Feedback makes the fringe lean in phase, so that in
    time it leans the other way when the motion turns; a slow detector makes it lean one way in time.
    """
    stretches = law_stretches(values, passes, low, high)
    ways = np.zeros(len(stretches), dtype=np.int64)
    for k, (first, end) in enumerate(stretches[:, :2].astype(int).tolist()):
        seen = direction[first:end]
        ways[k] = int(seen[0]) if len(seen) and np.all(seen == seen[0]) else 2
    shapes = _direction_shapes(stretches, ways)
    causes = [cause for one in shapes for cause in _harmonic_causes(one, clipped)]
    causes += _lean_causes(shapes) + _step_causes(values, stretches)
    return FringeShape(shapes, stretches[:, [0, 1, 3, 4, 5]], causes)
