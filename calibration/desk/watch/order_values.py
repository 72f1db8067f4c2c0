"""Values in orders from a page: numbers in the unit that the page shows, or text with a unit."""

from math import isfinite, radians
from typing import Any

from metro.errors import MetroError
from metro.units import si

__all__ = ["number", "phase"]


def number(given: Any, name: str, unit: str) -> float:  # noqa: ANN401  # from a page
    """Return a value in SI: a number in the unit that the page shows, or text with a unit.

    Parameters
    ----------
    given : object
        From a page.
    name, unit : str
        What it is, and its SI unit.

    Returns
    -------
    float
        Finite.

    Raises
    ------
    MetroError
        If it is anything else.
    """
    if isinstance(given, bool) or not isinstance(given, int | float | str):
        raise MetroError(f"{name} must be a number in {unit}, got {given!r}")
    try:
        value = float(given)
    except ValueError:
        value = float(si(given, name, unit))
    if not isfinite(value):
        raise MetroError(f"{name} must be finite, got {given!r}")
    return value


def phase(given: Any) -> float:  # noqa: ANN401  # from a page
    """Return a phase in radians from degrees, or from text with a unit.

    Parameters
    ----------
    given : object
        From a page; empty text is 0.

    Returns
    -------
    float
        Finite [rad].

    Raises
    ------
    MetroError
        If it is anything else.
    """
    if isinstance(given, str) and not given.strip():
        return 0.0
    try:
        return radians(float(given))
    except (TypeError, ValueError):
        return number(given, "phase", "rad")
