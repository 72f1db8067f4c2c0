"""Values in orders from a page: numbers in the unit that the page shows, or text with a unit."""

import re
from math import inf, isfinite, radians
from typing import Any

from metro.errors import MetroError
from metro.units import si

__all__ = ["number", "phase"]

# A decimal number and nothing else that `float` takes: no underscores, no digits of other scripts.
_PLAIN = re.compile(r"[ \t]*[+-]?([0-9]+\.?[0-9]*|\.[0-9]+)([eE][+-]?[0-9]+)?[ \t]*")
_WITH_UNIT = re.compile(r"[ -~µμΩ°]+")


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
    if isinstance(given, str) and not _PLAIN.fullmatch(given):
        if "_" in given or not _WITH_UNIT.fullmatch(given):
            raise MetroError(f"{name} must be a number in {unit} or have a unit, got {given!r}")
        value = float(si(given, name, unit))
    else:
        value = _float(given)
    if not isfinite(value):
        raise MetroError(f"{name} must be finite, got {str(given)[:40]!r}")
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
    is_plain = isinstance(given, str) and _PLAIN.fullmatch(given)
    if isinstance(given, str) and not is_plain:
        return number(given, "phase", "rad")
    return radians(number(given, "phase", "°"))


def _float(given: float | str) -> float:
    """Return a float, infinite where there is none so large."""
    try:
        return float(given)
    except OverflowError:
        return inf
