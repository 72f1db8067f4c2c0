"""Values with units: one pint registry, our own split of number and unit, and the door check.

A value is one number, an optional space, one unit. The number is split off here and pint is given
only the unit: given whole strings, pint reads ``1,5 mm`` as 15 mm and evaluates ``3 kg+1 kg``.
pint is imported on the first value that needs it, never by importing this module.
"""

import math
from typing import TYPE_CHECKING, Any

from metro.errors import MetroError
from metro.unit_registry import parse_unit, parsed_unit, registry
from metro.unit_scale import scale_to, scaled
from metro.value_text import spell_unit, split_value

if TYPE_CHECKING:
    from typing import TypeAlias

    import numpy as np
    import pint

    Quantity: TypeAlias = pint.Quantity[Any]
    """A magnitude with its unit, of the program's one registry."""

__all__ = ["Quantity", "parse_quantity", "quantity", "registry", "si", "split_value"]

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
    scale = scale_to(given, unit)
    if scale is None:
        raise MetroError(_wrong_dimension(value, name, unit))
    result = scaled(magnitude, *scale, offset)
    _check_range(result, value, name, unit, (minimum, maximum, above, below))
    return result


# Where the zero of a temperature scale lies, in kelvin.
_OFFSETS = {"degree_Celsius": 273.15, "degree_Fahrenheit": 459.67 * 5 / 9}


def _magnitude_and_unit(value: object, name: str, unit: str) -> tuple[Any, Any]:
    if isinstance(value, str):
        number, text = split_value(value, name, unit)
        if not text and unit not in _RATIO_UNITS:
            raise MetroError(_wrong_dimension(value, name, unit))
        return number, parse_unit(text or unit, name, value)
    magnitude = getattr(value, "magnitude", None)
    if magnitude is not None and hasattr(value, "unit"):  # a measured value
        return _real(magnitude, name), parsed_unit(value.unit)
    if magnitude is not None:
        return _real(magnitude, name), _own_unit(value, name)
    if value is None or isinstance(value, bool) or unit not in _RATIO_UNITS:
        raise MetroError(_wrong_dimension(value, name, unit))
    return _real(value, name), parsed_unit(unit)


def _own_unit(value: Any, name: str) -> Any:  # noqa: ANN401  # any registry's quantity
    if value._REGISTRY is registry():  # noqa: SLF001  # pint's name for it
        return value.units
    return parse_unit(spell_unit(str(value.units).replace("dimensionless", "")), name, value)


def _real(magnitude: Any, name: str) -> "float | np.ndarray[Any, Any]":  # noqa: ANN401  # any number
    if isinstance(magnitude, (int, float)):
        try:
            return float(magnitude)
        except OverflowError:  # a whole number of more than 308 digits
            raise MetroError(f"{name} must be finite, got a number too large to hold") from None
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
    if hasattr(value, "units"):
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
    return quantity(number, parse_unit(unit, name, text))


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
    parsed = parsed_unit(unit) if isinstance(unit, str) else unit
    made: Quantity = registry().Quantity(magnitude, parsed)
    return made
