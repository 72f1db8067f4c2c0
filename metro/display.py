"""Numbers for people: a sensible prefix, and the digits that the uncertainty deserves."""

import math
import re
from typing import TYPE_CHECKING, Any

if TYPE_CHECKING:
    from metro.measured import Measured

__all__ = ["show", "show_measured"]

_PREFIXES = {-18: "a", -15: "f", -12: "p", -9: "n", -6: "µ", -3: "m", 0: "", 3: "k", 6: "M", 9: "G"}
_PREFIXED = re.compile(r"(m|V|A|W|Hz|rad|Pa|ohm|s|K|F|H|N|J|C|S|T)(?=$|[*/])(?!\*\*)")
_NOT_UPWARD = frozenset({"s", "K", "rad"})  # kiloseconds and megakelvins are nobody's words


def show(magnitude: float | None, unit: str, digits: int = 4) -> str:
    """Return a number in an SI unit with a prefix, to some significant digits.

    Parameters
    ----------
    magnitude : float or None
        In ``unit``; None shows as "unknown".
    unit : str
        A coherent SI unit as JSON writes it.
    digits : int
        Significant digits.

    Returns
    -------
    str
        Such as ``"35.2 nm/V"``.
    """
    if magnitude is None or not math.isfinite(magnitude):
        return "unknown"
    exponent, text = _scaled_unit(abs(magnitude), unit)
    return _joined(_rounded(magnitude / 10.0**exponent, digits), text)


def show_measured(measured: "Measured", p: float = 0.95) -> str:
    """Return a measured value for people: value, expanded uncertainty and its coverage.

    Parameters
    ----------
    measured : Measured
        Scalar or array.
    p : float
        Coverage probability.

    Returns
    -------
    str
        Such as ``"35.2 nm/V, U = 0.1 nm/V (95 %)"``; U to two significant digits at most.
    """
    if getattr(measured.magnitude, "shape", ()):
        return _show_array(measured)
    value, u = float(measured.magnitude), measured.u_magnitude
    if u is None or not math.isfinite(u) or not math.isfinite(value):
        return f"{show(value, measured.unit, 6)}, U unknown"
    half_width = measured.coverage_factor(p) * float(u)
    if half_width == 0:
        return f"{show(value, measured.unit, 10)}, U = 0 ({100 * p:.4g} %)"
    exponent, text = _scaled_unit(max(abs(value), half_width), measured.unit)
    number, width = _aligned(value / 10.0**exponent, half_width / 10.0**exponent)
    return f"{_joined(number, text)}, U = {_joined(width, text)} ({100 * p:.4g} %)"


def _show_array(measured: "Measured") -> str:
    shape = "×".join(str(n) for n in measured.magnitude.shape)
    u = "U unknown" if measured.u_magnitude is None else "with uncertainties"
    return f"{shape} values in {_people(measured.unit)}, {u}"


def _scaled_unit(size: float, unit: str) -> tuple[int, str]:
    match = _PREFIXED.match(unit)
    if match is None or size == 0 or not math.isfinite(size):
        return 0, _people(unit)
    # 999.95 would round up to 1000; the next prefix then reads better
    exponent = 3 * math.floor(math.log10(size * 1.00005) / 3)
    exponent = min(max(exponent, -18), 0 if match[1] in _NOT_UPWARD else 9)
    return exponent, _PREFIXES[exponent] + _people(unit)


def _people(unit: str) -> str:
    unit = re.sub(r"([A-Za-z]+)\*\*0\.5", r"√\1", unit)
    unit = unit.replace("**2", "²").replace("**3", "³").replace("ohm", "Ω").replace("*", "·")
    return "" if unit == "1" else unit


def _joined(number: str, unit: str) -> str:
    return f"{number} {unit}" if unit else number


def _rounded(number: float, digits: int) -> str:
    text = f"{number:.{digits}g}"
    if "e" in text and 1e-4 <= abs(number) < 1e9:
        text = f"{float(text):.0f}"
    return text


def _aligned(number: float, width: float) -> tuple[str, str]:
    """Round the width to two significant digits and the number to the same place."""
    place = math.floor(math.log10(width)) - 1
    if float(f"{width:.1e}") >= 10.0 ** (place + 2):
        place += 1
    if place < -9 or place > 5:
        digits = max(0, math.floor(math.log10(max(abs(number), width))) - place)
        return f"{number:.{digits}e}", f"{width:.1e}"
    decimals = max(0, -place)
    texts = f"{round(number, -place):.{decimals}f}", f"{round(width, -place):.{decimals}f}"
    while all("." in text and text[-1] == "0" for text in texts):
        texts = texts[0][:-1], texts[1][:-1]
    return texts[0].rstrip("."), texts[1].rstrip(".")


def show_any(value: Any) -> str:  # noqa: ANN401  # whatever a table cell holds
    """Return a table cell's text: measured values, quantities, numbers, None as "unknown".

    Parameters
    ----------
    value : object
        What the cell holds.

    Returns
    -------
    str
        One line.
    """
    if value is None:
        return "unknown"
    if isinstance(value, float):
        return f"{value:.6g}"
    return " ".join(str(value).split())
