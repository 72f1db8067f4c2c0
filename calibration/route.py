"""A route: one published way from a photodiode record to metres, with its valid range."""

import math
from dataclasses import dataclass, field

from calibration.ruler import Ruler
from metro.measured import Measured

__all__ = ["Agreement", "Route", "agreement_of", "in_metres"]


@dataclass(frozen=True)
class Route:
    """What one route gave.

    Attributes
    ----------
    route : str
        Name, such as "driven fringe".
    valid_range : str
        Where the route may be used.
    phase_amplitude : list of Measured, or None
        Depth of each line [rad]; None where the route does not apply.
    displacement_amplitude : list of Measured, or None
        Depth of each line [m]; None without a wavelength or where the route does not apply.
    reasons : list of str
        Why it must not be trusted here; empty where nothing was found.
    """

    route: str
    valid_range: str
    phase_amplitude: list[Measured] | None
    displacement_amplitude: list[Measured] | None
    reasons: list[str] = field(default_factory=list)

    def to_dict(self) -> dict[str, object]:
        """Return the JSON form.

        Returns
        -------
        dict
            Plain values and Measured.
        """
        return {
            "route": self.route,
            "displacement_amplitude": self.displacement_amplitude,
            "phase_amplitude": self.phase_amplitude,
            "valid_range": self.valid_range,
            "reasons": self.reasons,
        }


@dataclass(frozen=True)
class Agreement:
    """How well the other routes agree with the driven fringe.

    Attributes
    ----------
    normalised_error : float
        The largest |difference|/U(difference), U at k = 2.
    agree : bool
        Whether it is at most 1: then the routes are consistent, which confirms neither.
    compared : tuple of str
        Names of the routes compared with the driven fringe.
    """

    normalised_error: float
    agree: bool
    compared: tuple[str, ...]

    def to_dict(self) -> dict[str, object]:
        """Return the JSON form.

        Returns
        -------
        dict
            Plain values and Measured.
        """
        return {
            "normalised_error": self.normalised_error,
            "agree": self.agree,
            "compared": list(self.compared),
        }


def in_metres(depths: list[Measured], ruler: Ruler | None) -> list[Measured] | None:
    """Return depths in metres, None without a ruler.

    Parameters
    ----------
    depths : list of Measured
        Depths [rad].
    ruler : Ruler or None
        Metres per radian.

    Returns
    -------
    list of Measured, or None
        Depths [m].
    """
    if ruler is None:
        return None
    out = []
    for depth in depths:
        value = float(depth.magnitude) * ruler.metres_per_rad
        own = float(depth.u_magnitude or 0.0) * ruler.metres_per_rad
        out.append(Measured.of(value, "m", math.hypot(own, value * ruler.relative_u), depth.dof))
    return out


def _difference_u(best: Measured, other: Measured) -> float:
    """Return the standard uncertainty of the difference between two routes on the same samples.

    The best fit of a record has with any other estimate from that record the covariance u_best²,
    so that u² = u_other² − u_best² (Hausman 1978, from memory). Wavelength and air are common and
    cancel. A tenth of both variances and 0.05 % of the depth are kept because neither route is
    exactly what it assumes.
    """
    one, two = float(best.u_magnitude or 0.0), float(other.u_magnitude or 0.0)
    least = 0.1 * (one**2 + two**2) + (5e-4 * float(best.magnitude)) ** 2
    return math.sqrt(max(two**2 - one**2, least))


def agreement_of(routes: list[Route]) -> Agreement | None:
    """Compare every route that may be trusted with the first of the list.

    Parameters
    ----------
    routes : list of Route
        The driven fringe first.

    Returns
    -------
    Agreement or None
        None where fewer than two routes may be trusted.
    """
    first = routes[0]
    if first.reasons or first.phase_amplitude is None:
        return None
    worst, names = 0.0, []
    for other in routes[1:]:
        if other.reasons or other.phase_amplitude is None:
            continue
        names.append(other.route)
        for a, b in zip(first.phase_amplitude, other.phase_amplitude, strict=True):
            u = max(_difference_u(a, b), 1e-12)
            worst = max(worst, abs(float(a.magnitude) - float(b.magnitude)) / (2.0 * u))
    return Agreement(worst, worst <= 1.0, tuple(names)) if names else None
