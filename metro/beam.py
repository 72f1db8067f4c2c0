"""Coherence, tilt and offset of beams, with values that carry units."""

from __future__ import annotations

from typing import TYPE_CHECKING

from metro.elementwise import elementwise
from metro.kernel import beam as kernel
from metro.units import quantity, si

if TYPE_CHECKING:
    from metro.units import Quantity

__all__ = ["coherence", "coherence_length", "tilt_contrast", "tilt_displacement"]


def coherence(path_difference: Quantity | str, linewidth: Quantity | str) -> Quantity:
    """Return the contrast that a laser of some linewidth leaves at a path difference.

    Parameters
    ----------
    path_difference : Quantity or str
        Optical path difference of the two beams: twice the arm mismatch for one round trip; scalar or
        array.
    linewidth : Quantity or str
        Full width at half maximum of a Lorentzian line; ≥ 0.

    Returns
    -------
    Quantity
        exp(−πΔν|τ|), dimensionless.

    Raises
    ------
    MetroError
        If an argument has the wrong dimension or is out of range.

    References
    ----------
    J. W. Goodman, *Statistical Optics*, Wiley 1985, section 5.1.3 (from memory).
    """
    path = si(path_difference, "path_difference", "m")
    width = si(linewidth, "linewidth", "Hz", minimum=0.0)
    return quantity(elementwise(kernel.coherence, path, width), "1")


def coherence_length(linewidth: Quantity | str) -> Quantity:
    """Return the path difference at which a Lorentzian line leaves 1/e of the contrast.

    Parameters
    ----------
    linewidth : Quantity or str
        Full width at half maximum; > 0.

    Returns
    -------
    Quantity
        c/(πΔν) [m].

    Raises
    ------
    MetroError
        If the argument has the wrong dimension or is not positive.
    """
    width = si(linewidth, "linewidth", "Hz", above=0.0)
    return quantity(kernel.coherence_length_m(width), "m")


def tilt_displacement(tilt: Quantity | str, beam_offset: Quantity | str) -> Quantity:
    """Return the displacement that a tilting mirror shows to a beam off its pivot.

    Parameters
    ----------
    tilt : Quantity or str
        Tilt of the mirror, small; scalar or array.
    beam_offset : Quantity or str
        Distance of the beam from the pivot.

    Returns
    -------
    Quantity
        Displacement [m].

    Raises
    ------
    MetroError
        If an argument has the wrong dimension.
    """
    angle = si(tilt, "tilt", "rad")
    offset = si(beam_offset, "beam_offset", "m")
    return quantity(kernel.tilt_displacement_m(angle, offset), "m")


def tilt_contrast(
    tilt: Quantity | str, beam_radius: Quantity | str, wavelength: Quantity | str
) -> Quantity:
    """Return the contrast that a tilted mirror leaves between two equal Gaussian beams.

    Parameters
    ----------
    tilt : Quantity or str
        Tilt of one mirror; scalar or array.
    beam_radius : Quantity or str
        Radius at which the intensity has fallen to 1/e²; > 0.
    wavelength : Quantity or str
        Wavelength; > 0.

    Returns
    -------
    Quantity
        exp(−2(πwθ/λ)²), dimensionless; beams collimated and centred.

    Raises
    ------
    MetroError
        If an argument has the wrong dimension or is out of range.
    """
    angle = si(tilt, "tilt", "rad")
    radius = si(beam_radius, "beam_radius", "m", above=0.0)
    lam = si(wavelength, "wavelength", "m", above=0.0)
    return quantity(elementwise(kernel.tilt_contrast, angle, radius, lam), "1")
