"""A value as people write it: one number, an optional space, one unit."""

import math
import re

from metro.errors import MetroError

__all__ = ["spell_unit", "split_value"]

_NUMBER = re.compile(r"([+-]?(?:\d+\.?\d*|\.\d+)(?:[eE][+-]?\d+)?)\s*(.*)", re.DOTALL)
_COMMA = re.compile(r"[+-]?\d*,\d")
_NOT_FINITE = re.compile(r"[+-]?(nan|inf|infinity)\b", re.IGNORECASE)
_UNIT = re.compile(
    r"(?:1?/)?[A-Za-z_]+(?:\*\*-?(?:\d+(?:\.\d+)?))?(?:(?: ?[*/] ?| )[A-Za-z_]+(?:\*\*-?(?:\d+(?:\.\d+)?))?)*"
)
_SPELLINGS = (
    ("µ", "u"),
    ("μ", "u"),
    ("Ω", "ohm"),
    ("Ω", "ohm"),
    ("°C", "degC"),
    ("℃", "degC"),
    ("°F", "degF"),
    ("°", "deg"),
    ("Å", "angstrom"),
    ("Å", "angstrom"),
    ("%", "percent"),
    ("‰", "permille"),
    ("²", "**2"),
    ("³", "**3"),
    ("⁻¹", "**-1"),
    ("⁻²", "**-2"),
    ("·", "*"),
    ("⋅", "*"),
    ("^", "**"),
    ("(1/2)", "0.5"),
    ("**1/2", "**0.5"),
)
_ROOT = re.compile(r"√\s*\(?([A-Za-z]+)\)?|\bsqrt\(\s*([A-Za-z]+)\s*\)")


def split_value(text: str, name: str = "value", unit: str = "") -> tuple[float, str]:
    """Split a value into its number and the text of its unit.

    Parameters
    ----------
    text : str
        One number, an optional space, one unit: ``"42cm"``, ``"632.8 nm"``, ``"-3pm"``, ``"0.5"``.
    name : str
        What the value is, for the message.
    unit : str
        What is expected, for the message: ``"1"`` for a pure number.

    Returns
    -------
    tuple of (float, str)
        The number, and the unit in the spelling pint reads (``""`` without a unit).

    Raises
    ------
    MetroError
        If there is no finite number, a decimal comma, or more than one number.
    """
    stripped = text.strip().replace("−", "-")
    match = _NUMBER.fullmatch(stripped)
    if match is None or _COMMA.match(stripped):
        raise MetroError(_why_no_number(text, stripped, name, unit))
    number = float(match[1])
    if not math.isfinite(number):
        raise MetroError(f"{name} must be a finite number, got {text!r}")
    written = spell_unit(match[2])
    if written and not _UNIT.fullmatch(written):
        raise MetroError(f"{name} must be {_form(unit)}, without arithmetic, got {text!r}")
    return number, written


def spell_unit(unit: str) -> str:
    """Return a unit in the spelling pint reads: ``m/√Hz`` becomes ``m/Hz**0.5``.

    Parameters
    ----------
    unit : str
        A unit as people write it.

    Returns
    -------
    str
        The same unit in ASCII.
    """
    unit = _ROOT.sub(lambda m: f"{m[1] or m[2]}**0.5", unit.strip())
    for written, spelled in _SPELLINGS:
        unit = unit.replace(written, spelled)
    return unit.strip()


def _form(unit: str) -> str:
    """Return how a value of a unit is written, for messages."""
    return "a number" if unit == "1" else "one number and one unit (such as '632.8 nm')"


def _why_no_number(text: str, stripped: str, name: str, unit: str) -> str:
    if _COMMA.match(stripped):
        return f"{name} must be written with a decimal point, not a comma, got {text!r}"
    if _NOT_FINITE.match(stripped):
        return f"{name} must be a finite number, got {text!r}"
    return f"{name} must be {_form(unit)}, got {text!r}"
