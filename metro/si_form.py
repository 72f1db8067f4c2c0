"""Units as JSON writes them: coherent SI, ASCII, ``m``, ``V``, ``m/Hz**0.5``, ``1``."""

import re
from functools import cache
from typing import Any

from metro.unit_registry import registry, root_units

__all__ = ["si_form", "unit_text"]

_TERM = re.compile(r"([*/]?)([A-Za-z]+|1)(?:\*\*(-?[\d.]+))?")


@cache
def si_form(unit: Any) -> tuple[str, float, float]:  # noqa: ANN401  # pint's Unit is generic
    """Return the coherent SI unit of a unit, and what brings a magnitude there.

    Parameters
    ----------
    unit : pint.Unit
        Of the program's registry.

    Returns
    -------
    tuple of (str, float, float)
        The unit's text, the factor and the offset: ``magnitude * factor + offset`` is in SI.
    """
    powers: dict[str, float] = {}
    for name, exponent in unit._units.items():  # noqa: SLF001  # pint's only way to the exponents
        for symbol, power in _terms(_si_name(name)):
            powers[symbol] = powers.get(symbol, 0) + power * exponent
    text = unit_text(powers)
    factor, _ = root_units(unit)
    if text != "1":
        factor /= root_units(registry().parse_units(text))[0]
    return text, factor, _offset(str(unit))


def _offset(name: str) -> float:
    return {"degree_Celsius": 273.15, "degree_Fahrenheit": 459.67 * 5 / 9}.get(name, 0.0)


def _si_name(name: str) -> str:
    from metro.unit_definitions import SI_NAMES

    if name in SI_NAMES:
        return SI_NAMES[name]
    for _, base, _ in registry().parse_unit_name(name):
        return SI_NAMES[base]
    return name


def _terms(text: str) -> list[tuple[str, float]]:
    terms = []
    for sign, symbol, exponent in _TERM.findall(text):
        if symbol != "1":
            power = float(exponent or 1)
            terms.append((symbol, -power if sign == "/" else power))
    return terms


def unit_text(powers: dict[str, float]) -> str:
    """Return the text of a product of unit powers.

    Parameters
    ----------
    powers : dict
        Exponent of each unit symbol.

    Returns
    -------
    str
        Such as ``"m/Hz**0.5"``; ``"1"`` where nothing remains.
    """
    above = [_power(s, p) for s, p in powers.items() if p > 0]
    below = [_power(s, -p) for s, p in powers.items() if p < 0]
    return "/".join(["*".join(above) or "1", *below])


def _power(symbol: str, power: float) -> str:
    return symbol if power == 1 else f"{symbol}**{power:g}"
