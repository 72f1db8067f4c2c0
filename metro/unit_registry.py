"""The one pint registry of the program, built from our own definitions on first use.

pint is imported on the first value that needs it, never by importing this module.
"""

import sys
from functools import cache
from typing import TYPE_CHECKING, Any

from metro.errors import MetroError
from metro.value_text import spell_unit

if TYPE_CHECKING:
    import pint

__all__ = ["import_pint", "load_lean", "parse_unit", "parsed_unit", "registry", "root_units"]

_lean: list[bool] = []


def load_lean() -> None:
    """Let pint be imported without scipy and Babel, for a process that is ours alone.

    pint loads both where they are installed; the program asks pint for nothing that needs them,
    and they cost a tenth of its start-up.
    """
    _lean.append(True)


def import_pint() -> Any:  # noqa: ANN401  # the module
    """Return the module pint, imported now.

    Returns
    -------
    module
        As :func:`load_lean` left it, or whole.
    """
    hidden = [name for name in ("scipy", "babel") if _lean and name not in sys.modules]
    for name in hidden:
        sys.modules[name] = None  # type: ignore[assignment]  # import then says it is not there
    try:
        import pint
    finally:
        for name in hidden:
            del sys.modules[name]
    return pint


@cache
def registry() -> "pint.UnitRegistry[Any]":
    """Return the one registry of the program, built on the first call.

    Returns
    -------
    pint.UnitRegistry
        Knows the units of :mod:`metro.unit_definitions` and no others.
    """
    pint_module = import_pint()
    from metro.unit_definitions import DEFINITIONS

    ureg: pint.UnitRegistry[Any] = pint_module.UnitRegistry(
        None, autoconvert_offset_to_baseunit=True
    )
    for definition in DEFINITIONS:
        ureg.define(definition)
    ureg.preprocessors.append(_careful)
    return ureg


def _careful(text: str) -> str:
    """Spell out what pint is given as text: "1,5 mm" would be 15 mm, "3 nm/√Hz" nm/Hz."""
    if "," in text:
        raise MetroError(f"a value must be written with a decimal point, not a comma, got {text!r}")
    return spell_unit(text)


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
    if unit in {"", "1"}:
        return registry().dimensionless
    try:
        return registry().parse_units("1" + unit if unit.startswith("/") else unit)
    except Exception as error:  # noqa: BLE001  # whatever pint makes of odd text, it is not a unit
        names = getattr(error, "unit_names", None)
        if not names:
            raise MetroError(f"has a unit that cannot be read, {unit!r}") from None
        unknown = names if isinstance(names, str) else names[0]
        raise MetroError(f"has an unknown unit {unknown!r}{_nearest_unit(unknown)}") from None


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
