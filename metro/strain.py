"""Strain to differential displacement, with values that carry units."""

from __future__ import annotations

import math
from typing import TYPE_CHECKING, Any

from metro.elementwise import elementwise, is_array
from metro.kernel import antenna, arms
from metro.kernel import strain as kernel
from metro.units import quantity, si

if TYPE_CHECKING:
    from metro.units import Quantity

__all__ = [
    "antenna_response",
    "arm_displacement",
    "arm_response",
    "arm_strain",
    "differential_m",
    "one_arm_displacement",
]


def arm_displacement(
    strain: Quantity | float | str, arm_length: Quantity | str, exact: bool = False
) -> Quantity:
    """Return the differential displacement that a strain gives two perpendicular arms.

    Parameters
    ----------
    strain : Quantity, float or str
        Gravitational-wave amplitude h along the arms; scalar or array. The arms change by +hL/2 and
        −hL/2. A one-arm length strain ΔL/L goes to :func:`one_arm_displacement`.
    arm_length : Quantity or str
        Length L of each arm, such as ``"4 km"``; > 0.
    exact : bool, default False
        Integrate the proper length, L(√(1+h) − √(1−h)), instead of first order, hL.

    Returns
    -------
    Quantity
        Length of the x arm less that of the y arm [m]; an array where an argument is one.

    Raises
    ------
    MetroError
        If an argument has the wrong dimension, or ``exact`` and the strain is outside −1 … 1.

    References
    ----------
    M. Maggiore, *Gravitational Waves*, volume 1, Oxford 2007, section 1.3.
    """
    bound = 1.0 if exact else None
    h = si(strain, "strain", "1", minimum=None if bound is None else -bound, maximum=bound)
    length = si(arm_length, "arm_length", "m", above=0.0)
    return quantity(differential_m(h, length, exact=exact), "m")


def differential_m(strain: Any, arm_length_m: Any, *, exact: bool = False) -> Any:  # noqa: ANN401  # floats and arrays alike
    """Return the differential displacement of plain numbers.

    Parameters
    ----------
    strain : float or ndarray
        Strain amplitude h.
    arm_length_m : float or ndarray
        Arm length [m].
    exact : bool, default False
        Integrate the proper length instead of taking first order.

    Returns
    -------
    float or ndarray
        Differential displacement [m].
    """
    if not exact:
        return kernel.differential_m(strain, arm_length_m)
    if not is_array(strain, arm_length_m):
        return kernel.exact_differential_m(strain, arm_length_m)
    import numpy as np

    return 2.0 * arm_length_m * strain / (np.sqrt(1.0 + strain) + np.sqrt(1.0 - strain))


def arm_strain(
    displacement: Quantity | str, arm_length: Quantity | str, exact: bool = False
) -> Quantity:
    """Return the strain that gives a differential displacement.

    Parameters
    ----------
    displacement : Quantity or str
        Length of the x arm less that of the y arm, scalar or array.
    arm_length : Quantity or str
        Length of each arm; > 0.
    exact : bool, default False
        Invert the proper length instead of first order; at most √2 arm lengths.

    Returns
    -------
    Quantity
        Strain amplitude h, dimensionless.

    Raises
    ------
    MetroError
        If an argument has the wrong dimension or is out of range.
    """
    length = si(arm_length, "arm_length", "m", above=0.0)
    change = si(displacement, "displacement", "m")
    if not exact:
        return quantity(kernel.strain(change, length), "1")
    limit = math.sqrt(2.0) * (length if isinstance(length, float) else float(length.min()))
    change = si(displacement, "displacement", "m", minimum=-limit, maximum=limit)
    return quantity(elementwise(kernel.strain_exact, change, length), "1")


def one_arm_displacement(
    length_strain: Quantity | float | str, arm_length: Quantity | str
) -> Quantity:
    """Return the displacement of one arm under its own length strain ΔL/L.

    Parameters
    ----------
    length_strain : Quantity, float or str
        ΔL/L of that arm: thermal expansion, say, or half the amplitude h of a wave along it.
    arm_length : Quantity or str
        Length of the arm; > 0.

    Returns
    -------
    Quantity
        Change of that arm [m]; the differential displacement if the other one stays.

    Raises
    ------
    MetroError
        If an argument has the wrong dimension.
    """
    ratio = si(length_strain, "length_strain", "1")
    length = si(arm_length, "arm_length", "m", above=0.0)
    return quantity(kernel.length_change_m(ratio, length), "m")


def arm_response(
    frequency: Quantity | str,
    arm_length: Quantity | str,
    direction_cosine: Quantity | float | str = 0.0,
) -> Quantity:
    """Return the round-trip response of an arm that light needs time to cross.

    Parameters
    ----------
    frequency : Quantity or str
        Frequency of the strain; scalar or array.
    arm_length : Quantity or str
        Arm length; > 0.
    direction_cosine : Quantity or float, default 0
        Arm unit vector times the wave's direction of propagation, −1 … 1; 0 is normal incidence.

    Returns
    -------
    Quantity
        Complex, dimensionless; 1 at frequency zero, phase counted from the light's return to the
        beam splitter: sinc(2πfL/c)·exp(−2πifL/c) at normal incidence.

    Raises
    ------
    MetroError
        If an argument has the wrong dimension or is out of range.

    References
    ----------
    R. Schilling, Class. Quantum Grav. 14 (1997) 1513; M. Rakhmanov, J. D. Romano and J. T. Whelan,
    Class. Quantum Grav. 25 (2008) 184017.
    """
    f = si(frequency, "frequency", "Hz")
    length = si(arm_length, "arm_length", "m", above=0.0)
    cosine = si(direction_cosine, "direction_cosine", "1", minimum=-1.0, maximum=1.0)
    return quantity(elementwise(arms.arm_response, f, length, cosine), "1")


def antenna_response(
    theta: Quantity | str,
    phi: Quantity | str,
    psi: Quantity | str,
    opening_angle: Quantity | str = "90 deg",
) -> tuple[Quantity, Quantity]:
    """Return the response of the pair of arms to the plus and the cross polarisation.

    Parameters
    ----------
    theta, phi : Quantity or str
        Polar angle and azimuth of the source; the arms lie along x and y.
    psi : Quantity or str
        Polarisation angle.
    opening_angle : Quantity or str, default "90 deg"
        Angle between the arms, 0 … 180°; their bisector stays and the response scales by its sine.

    Returns
    -------
    tuple of Quantity
        Plus and cross response, dimensionless, for waves long against the arms.

    Raises
    ------
    MetroError
        If an argument has the wrong dimension or is out of range.

    Notes
    -----
    F₊ = ½(1+cos²θ)cos2φ cos2ψ − cosθ sin2φ sin2ψ,
    F× = ½(1+cos²θ)cos2φ sin2ψ + cosθ sin2φ cos2ψ.

    References
    ----------
    M. Maggiore, *Gravitational Waves*, volume 1, Oxford 2007, section 7.2.
    """
    angles = (
        si(theta, "theta", "rad"),
        si(phi, "phi", "rad"),
        si(psi, "psi", "rad"),
        si(opening_angle, "opening_angle", "rad", above=0.0, maximum=math.pi),
    )
    both = elementwise(antenna.antenna_response, *angles)
    if isinstance(both, tuple):
        return quantity(both[0], "1"), quantity(both[1], "1")
    return quantity(both[..., 0], "1"), quantity(both[..., 1], "1")
