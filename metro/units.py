"""Values with units: one pint registry, our own split of number and unit, and the door check.

A value is one number, an optional space, one unit. The number is split off here and pint is given
only the unit: given whole strings, pint reads ``1,5 mm`` as 15 mm and evaluates ``3 kg+1 kg``.
pint is imported on the first value that needs it, never by importing this module.
"""

import math
import re
from decimal import Decimal
from functools import cache
from typing import TYPE_CHECKING, Any

from metro.errors import MetroError

if TYPE_CHECKING:
    from typing import TypeAlias

    import numpy as np
    import pint

    Quantity: TypeAlias = pint.Quantity[Any]
    """A magnitude with its unit, of the program's one registry."""

__all__ = ["Quantity", "parse_quantity", "quantity", "registry", "si", "split_value"]

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
_RATIO_UNITS = frozenset({"1", "fringe", "count", "bit"})
# What a unit measures and how a value of it is written, for messages.
_EXAMPLES = {
    "m": ("length", "0.5 m"),
    "s": ("time", "10 s"),
    "Hz": ("frequency", "87.1 Hz"),
    "rad": ("angle", "0.02 rad"),
    "K": ("temperature", "20 degC"),
    "Pa": ("pressure", "101325 Pa"),
    "W": ("power", "80 uW"),
    "A": ("current", "50 uA"),
    "V": ("voltage", "1.2 V"),
    "ohm": ("resistance", "20 kohm"),
    "A/W": ("current per power", "0.4 A/W"),
    "V/A": ("voltage per current", "20 kohm"),
    "m/V": ("length per voltage", "35 nm/V"),
    "V/m": ("voltage per length", "1 V/um"),
    "rad/V": ("angle per voltage", "0.7 rad/V"),
    "V/rad": ("voltage per angle", "2 V/rad"),
    "m/Hz**0.5": ("length per square root of frequency", "1 pm/√Hz"),
    "V/Hz**0.5": ("voltage per square root of frequency", "20 nV/√Hz"),
    "Hz/Hz**0.5": ("frequency per square root of frequency", "1 kHz/√Hz"),
    "1/Hz**0.5": ("one per square root of frequency", "1e-7 /√Hz"),
    "1": ("no dimension", "0.5"),
    "fringe": ("fringes", "0.25 fringe"),
    "count": ("counts", "120 counts"),
    "bit": ("bits", "16 bit"),
}


def __getattr__(name: str) -> Any:  # noqa: ANN401  # the class exists once the registry does
    if name == "Quantity":
        return registry().Quantity
    raise AttributeError(f"module 'metro.units' has no attribute {name!r}")


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


def split_value(text: str, name: str = "value") -> tuple[float, str]:
    """Split a value into its number and the text of its unit.

    Parameters
    ----------
    text : str
        One number, an optional space, one unit: ``"42cm"``, ``"632.8 nm"``, ``"-3pm"``, ``"0.5"``.
    name : str
        What the value is, for the message.

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
        raise MetroError(_why_no_number(text, stripped, name))
    number = float(match[1])
    if not math.isfinite(number):
        raise MetroError(f"{name} must be a finite number, got {text!r}")
    unit = spell_unit(match[2])
    if unit and not _UNIT.fullmatch(unit):
        raise MetroError(
            f"{name} must be one number and one unit (such as '632.8 nm'), without arithmetic, got {text!r}"
        )
    return number, unit


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


def _why_no_number(text: str, stripped: str, name: str) -> str:
    if _COMMA.match(stripped):
        return f"{name} must be written with a decimal point, not a comma, got {text!r}"
    if _NOT_FINITE.match(stripped):
        return f"{name} must be a finite number, got {text!r}"
    return f"{name} must be one number and one unit (such as '632.8 nm'), got {text!r}"


def _parse_unit(unit: str, name: str, given: object) -> Any:  # noqa: ANN401  # pint's Unit is generic
    try:
        return _parsed_unit(unit)
    except MetroError as error:
        raise MetroError(f"{name} {error}, got {given!r}") from None


@cache
def _parsed_unit(unit: str) -> Any:  # noqa: ANN401  # pint's Unit is generic
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


@cache
def _factor(unit: Any, wanted: str) -> float | None:  # noqa: ANN401  # pint's Unit is generic
    """Return what a magnitude is multiplied with to be in ``wanted``, None if dimensions differ."""
    given_factor, given = root_units(unit)
    wanted_factor, target = root_units(_parsed_unit(wanted))
    powers = _without_counts(given)
    targets = _without_counts(target)
    excess = powers.pop("radian", 0) - targets.pop("radian", 0)
    if powers != targets:
        return None
    factor = given_factor / wanted_factor
    if excess == 0:
        return factor
    # A cycle is 2π rad: rad/s for hertz (and the other way) is the one angle that may be converted.
    if abs(targets.get("second", 0)) == abs(excess):
        return factor * float((2 * math.pi) ** -excess)
    return None


@cache
def _scale(unit: Any, wanted: str) -> tuple[float, float] | None:  # noqa: ANN401  # pint's Unit is generic
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


def si(
    value: "Quantity | str | float",
    name: str,
    unit: str,
    *,
    minimum: float | None = None,
    maximum: float | None = None,
    above: float | None = None,
    below: float | None = None,
    difference: bool = False,
) -> Any:  # noqa: ANN401  # a float for a scalar, an ndarray for an array
    """Return the magnitude of a value in a unit, its dimension, finiteness and range checked.

    Parameters
    ----------
    value : Quantity or str
        What the caller gave; a bare number only where ``unit`` is ``"1"``, ``"fringe"``,
        ``"count"`` or ``"bit"``.
    name : str
        The parameter's name, for the message.
    unit : str
        The unit of the result, such as ``"m"`` or ``"m/Hz**0.5"``.
    minimum, maximum : float, optional
        Closed bounds, in ``unit``.
    above, below : float, optional
        Open bounds, in ``unit``.
    difference : bool
        Take ``degC`` as a difference of temperatures, as in an uncertainty of ``"0.3 degC"``.

    Returns
    -------
    float or ndarray, shape (n, …)
        The magnitude in ``unit``; an array where the value holds one.

    Raises
    ------
    MetroError
        If the value has no unit, another dimension, is not finite or out of range.
    """
    magnitude, given = _magnitude_and_unit(value, name, unit)
    offset = 0.0 if difference or unit != "K" else _OFFSETS.get(str(given), 0.0)
    scale = _scale(given, unit)
    if scale is None:
        raise MetroError(_wrong_dimension(value, name, unit))
    result = scaled(magnitude, *scale, offset)
    _check_range(result, value, name, unit, (minimum, maximum, above, below))
    return result


# Where the zero of a temperature scale lies, in kelvin.
_OFFSETS = {"degree_Celsius": 273.15, "degree_Fahrenheit": 459.67 * 5 / 9}


def _magnitude_and_unit(value: object, name: str, unit: str) -> tuple[Any, Any]:
    if isinstance(value, str):
        number, text = split_value(value, name)
        if not text and unit not in _RATIO_UNITS:
            raise MetroError(_wrong_dimension(value, name, unit))
        return number, _parse_unit(text or unit, name, value)
    magnitude = getattr(value, "magnitude", None)
    if magnitude is not None:
        return _real(magnitude, name), _own_unit(value, name)
    if value is None or isinstance(value, bool) or unit not in _RATIO_UNITS:
        raise MetroError(_wrong_dimension(value, name, unit))
    return _real(value, name), _parsed_unit(unit)


def _own_unit(value: Any, name: str) -> Any:  # noqa: ANN401  # any registry's quantity
    if value._REGISTRY is registry():  # noqa: SLF001  # pint's name for it
        return value.units
    return _parse_unit(spell_unit(str(value.units).replace("dimensionless", "")), name, value)


def _real(magnitude: Any, name: str) -> "float | np.ndarray[Any, Any]":  # noqa: ANN401  # any number
    if isinstance(magnitude, (int, float)):
        return float(magnitude)
    import numpy as np

    array = np.asarray(magnitude)
    if array.dtype.kind not in "iuf":
        raise MetroError(f"{name} must be real numbers, got {magnitude!r}")
    array = array.astype(np.float64)
    return float(array) if array.ndim == 0 else array


def _wrong_dimension(value: object, name: str, unit: str) -> str:
    noun, example = _EXAMPLES.get(unit, (f"the dimension of {unit}", f"1 {unit}"))
    if unit in _RATIO_UNITS:
        return f"{name} must be a pure number (such as '{example}'), got {_shown(value)}"
    return f"{name} must have a unit of {noun} (such as '{example}'), got {_shown(value)}"


def _shown(value: object) -> str:
    if hasattr(value, "magnitude"):
        return f"'{value:~}'".replace("\n", " ")
    return " ".join(repr(value).split())


def _check_range(
    result: Any,  # noqa: ANN401  # float or ndarray
    value: object,
    name: str,
    unit: str,
    bounds: tuple[float | None, float | None, float | None, float | None],
) -> None:
    low, high = result, result
    if not isinstance(result, float):
        if result.size == 0:
            return
        low, high = float(result.min()), float(result.max())
    if not (math.isfinite(low) and math.isfinite(high)):
        raise MetroError(f"{name} must be finite, got {_shown(value)}")
    minimum, maximum, above, below = bounds
    suffix = "" if unit in _RATIO_UNITS else f" {unit}"
    rules = (
        (minimum is not None and low < minimum, f"≥ {minimum}"),
        (maximum is not None and high > maximum, f"≤ {maximum}"),
        (above is not None and low <= above, f"> {above}"),
        (below is not None and high >= below, f"< {below}"),
    )
    for broken, rule in rules:
        if broken:
            raise MetroError(f"{name} must be {rule}{suffix}, got {_shown(value)}")


def parse_quantity(text: str, name: str = "value") -> "Quantity":
    """Return the quantity that a text names.

    Parameters
    ----------
    text : str
        One number, an optional space, one unit.
    name : str
        What the value is, for the message.

    Returns
    -------
    Quantity
        In the unit of the text.

    Raises
    ------
    MetroError
        If the text is no such value.
    """
    number, unit = split_value(text, name)
    return quantity(number, _parse_unit(unit, name, text))


def quantity(magnitude: Any, unit: Any) -> "Quantity":  # noqa: ANN401  # numbers, arrays; str or Unit
    """Return a quantity of the program's registry.

    Parameters
    ----------
    magnitude : float or ndarray
        In ``unit``.
    unit : str
        Such as ``"m"``, ``"m/Hz**0.5"`` or ``"1"``.

    Returns
    -------
    Quantity
        ``magnitude`` in ``unit``.
    """
    parsed = _parsed_unit(unit) if isinstance(unit, str) else unit
    made: Quantity = registry().Quantity(magnitude, parsed)
    return made
