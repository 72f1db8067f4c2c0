"""From one unit into another: dimensions compared, angles kept apart, decimal prefixes exact."""

import math
from decimal import Decimal
from functools import cache
from typing import Any

from metro.unit_registry import parsed_unit, root_units

__all__ = ["multiplier_and_divisor", "scale_to", "scaled"]


@cache
def _factor(unit: Any, wanted: str) -> float | None:  # noqa: ANN401  # pint's Unit is generic
    """Return what a magnitude is multiplied with to be in ``wanted``, None if dimensions differ."""
    given_factor, given = root_units(unit)
    wanted_factor, target = root_units(parsed_unit(wanted))
    powers = _without_counts(given)
    targets = _without_counts(target)
    excess = powers.pop("radian", 0) - targets.pop("radian", 0)
    if powers != targets:
        return None
    factor = given_factor / wanted_factor
    if excess == 0:
        return factor
    # A cycle is 2π rad: rad/s for hertz (and the other way) is the one angle that may be converted.
    with_hertz = _names_hertz(unit) or _names_hertz(parsed_unit(wanted))
    if with_hertz and abs(targets.get("second", 0)) == abs(excess):
        return factor * float((2 * math.pi) ** -excess)
    return None


@cache
def scale_to(unit: Any, wanted: str) -> tuple[float, float] | None:  # noqa: ANN401  # pint's Unit is generic
    """Return what brings a magnitude from one unit into another.

    Parameters
    ----------
    unit : pint.Unit
        Of the magnitude.
    wanted : str
        The other unit.

    Returns
    -------
    tuple of (float, float) or None
        Multiplier and divisor; None where the dimensions differ. Angles are a dimension here, and
        rad/s is brought into hertz by 2π.
    """
    factor = _factor(unit, wanted)
    return None if factor is None else multiplier_and_divisor(factor)


def multiplier_and_divisor(factor: float) -> tuple[float, float]:
    """Return a factor as ``multiplier / divisor`` such that decimal prefixes lose no digit.

    Parameters
    ----------
    factor : float
        Such as 1e-9, which no float is: ``632.8 / 1e9`` is the float nearest to 6.328e-7, while
        ``632.8 * 1e-9`` is its neighbour.

    Returns
    -------
    tuple of (float, float)
        Multiplier and divisor, one of them 1.
    """
    if not 0 < factor < 1:
        return factor, 1.0
    divisor = float(round(1 / factor))
    # Powers of ten are exact floats up to 1e22; a factor whose inverse is none stays as it is.
    if divisor <= 1e22 and abs(factor * divisor - 1) < 1e-15:
        return 1.0, divisor
    return factor, 1.0


def scaled(magnitude: Any, multiplier: float, divisor: float, offset: float) -> Any:  # noqa: ANN401  # float or ndarray
    """Return ``magnitude * multiplier / divisor + offset``, rounded once for a single number.

    Parameters
    ----------
    magnitude : float or ndarray
        What is converted.
    multiplier, divisor, offset : float
        As :func:`multiplier_and_divisor` gives them; the offset of a temperature scale.

    Returns
    -------
    float or ndarray
        For a float the result of decimal arithmetic on what people wrote: 632.99 nm is 6.3299e-07,
        -40 degC is 233.15; an array is computed in floats.
    """
    if not isinstance(magnitude, (int, float)):
        return magnitude * multiplier / divisor + offset
    number = Decimal(repr(float(magnitude))) * Decimal(repr(multiplier)) / Decimal(repr(divisor))
    return float(number + Decimal(repr(offset)))


def _without_counts(unit: Any) -> dict[str, float]:  # noqa: ANN401  # pint's Unit is generic
    powers = dict(unit._units)  # noqa: SLF001  # pint's only way to the exponents
    for name in ("count", "bit"):
        powers.pop(name, None)
    return powers


def _names_hertz(unit: Any) -> bool:  # noqa: ANN401  # pint's Unit is generic
    return any(name.endswith("hertz") for name in unit._units)  # noqa: SLF001  # as above
