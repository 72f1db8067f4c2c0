"""The one pint registry of the program, built from our own definitions on first use.

pint is imported on the first value that needs it, never by importing this module.
"""

from functools import cache
from typing import TYPE_CHECKING, Any

from metro.errors import MetroError

if TYPE_CHECKING:
    import pint

__all__ = ["parse_unit", "parsed_unit", "registry", "root_units"]


@cache
def registry() -> "pint.UnitRegistry[Any]":
    """Return the one registry of the program, built on the first call.

    Returns
    -------
    pint.UnitRegistry
        Knows the units of :mod:`metro.unit_definitions` and no others.
    """
    import pint

    from metro.unit_definitions import DEFINITIONS

    ureg: pint.UnitRegistry[Any] = pint.UnitRegistry(None, autoconvert_offset_to_baseunit=True)
    for definition in DEFINITIONS:
        ureg.define(definition)
    return ureg


def parse_unit(unit: str, name: str, given: object) -> Any:  # noqa: ANN401  # pint's Unit is generic
    """Return the unit that a text names, or say which value names none.

    Parameters
    ----------
    unit : str
        In the spelling pint reads.
    name : str
        What the value is, for the message.
    given : object
        The whole value, for the message.

    Returns
    -------
    pint.Unit
        Of the one registry.

    Raises
    ------
    MetroError
        If there is no such unit; the nearest known one is named.
    """
    try:
        return parsed_unit(unit)
    except MetroError as error:
        raise MetroError(f"{name} {error}, got {given!r}") from None


@cache
def parsed_unit(unit: str) -> Any:  # noqa: ANN401  # pint's Unit is generic
    """Return the unit that a text names, each text read once.

    Parameters
    ----------
    unit : str
        In the spelling pint reads; ``""`` and ``"1"`` for none.

    Returns
    -------
    pint.Unit
        Of the one registry.

    Raises
    ------
    MetroError
        If there is no such unit; the message is the end of a sentence.
    """
    import pint

    if unit in {"", "1"}:
        return registry().dimensionless
    try:
        return registry().parse_units("1" + unit if unit.startswith("/") else unit)
    except pint.UndefinedUnitError as error:
        names = error.unit_names
        unknown = names if isinstance(names, str) else names[0]
        raise MetroError(f"has an unknown unit {unknown!r}{_nearest_unit(unknown)}") from None
    except Exception:  # noqa: BLE001  # whatever pint makes of odd text, it is not a unit
        raise MetroError(f"has a unit that cannot be read, {unit!r}") from None


def _nearest_unit(unknown: str) -> str:
    from difflib import get_close_matches

    known = [u for u in _COMMON_UNITS if u != unknown]
    close = get_close_matches(unknown, known, 1, 0.5)
    return f" (nearest known: {close[0]!r})" if close else ""


_COMMON_UNITS = (
    *("m", "km", "cm", "mm", "um", "nm", "pm", "fm", "am", "angstrom", "micron", "inch", "ft"),
    *("s", "ms", "us", "ns", "min", "h", "d", "hour", "minute", "second", "meter", "metre"),
    *("Hz", "kHz", "MHz", "GHz", "mHz", "rad", "mrad", "urad", "deg", "fringe", "turn"),
    *("W", "mW", "uW", "nW", "A", "mA", "uA", "nA", "pA", "V", "mV", "uV", "kV", "volt", "watt"),
    *("ohm", "kohm", "Mohm", "F", "pF", "nF", "K", "mK", "degC", "degF", "celsius", "kelvin"),
    *("Pa", "hPa", "kPa", "bar", "mbar", "atm", "torr", "mmHg", "psi", "counts", "bit"),
    *("percent", "ppm", "ppb", "permille", "mol", "umol", "kg", "g", "N", "J", "eV"),
)


def root_units(unit: Any) -> tuple[float, Any]:  # noqa: ANN401  # pint's Unit is generic
    """Return a unit in the registry's base units: the factor and the product of base units.

    Parameters
    ----------
    unit : pint.Unit
        Of the program's registry.

    Returns
    -------
    tuple of (float, pint.Unit)
        Without the offset of a temperature scale.
    """
    factor: Any
    factor, root = registry().get_root_units(unit, check_nonmult=False)
    return float(factor), root
