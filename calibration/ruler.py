"""The ruler: metres per radian of phase, from the laser's wavelength."""

import math
from dataclasses import dataclass
from typing import TYPE_CHECKING, Any

if TYPE_CHECKING:
    from metro.measured import Measured
    from metro.units import Quantity

__all__ = ["Ruler", "ruler_of"]


@dataclass(frozen=True)
class Ruler:
    """Metres of displacement per radian of phase.

    Attributes
    ----------
    metres_per_rad : float
        Wavelength / (4π · index · round trips) [m/rad].
    relative_u : float
        Its relative standard uncertainty.
    dof : float
        Degrees of freedom of that.
    """

    metres_per_rad: float
    relative_u: float
    dof: float = math.inf


def ruler_of(
    wavelength: "Quantity | str | Measured",
    index: "float | Quantity | Measured" = 1.0,
    round_trips: int = 1,
) -> Ruler:
    """Return the ruler that a wavelength is.

    Parameters
    ----------
    wavelength : Quantity, str or Measured
        Vacuum wavelength [m].
    index : float, Quantity or Measured, optional
        Refractive index of what fills the arms.
    round_trips : int, optional
        Round trips in each arm.

    Returns
    -------
    Ruler
        Metres of displacement per radian of phase.
    """
    wave, medium = _measured(wavelength, "wavelength", "m"), _measured(index, "index", "1")
    relative = math.hypot(
        *[float(part.u_magnitude or 0.0) / float(part.magnitude) for part in (wave, medium)]
    )
    scale = float(wave.magnitude) / (4.0 * math.pi * float(medium.magnitude) * round_trips)
    return Ruler(scale, relative, min(wave.dof, medium.dof))


def _measured(value: Any, name: str, unit: str) -> "Measured":  # noqa: ANN401  # what ruler_of takes
    from metro.measured import Measured
    from metro.units import si

    if isinstance(value, Measured):
        return value
    return Measured.of(float(si(value, name, unit, above=0.0)), unit, 0.0)
