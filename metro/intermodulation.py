"""Harmonics and intermodulation of all lines together on the curved fringe."""

from __future__ import annotations

import math
from dataclasses import dataclass
from typing import TYPE_CHECKING

from metro.kernel.bessel import bessels

if TYPE_CHECKING:
    from collections.abc import Iterator, Sequence

__all__ = ["Product", "folded", "products"]

_MANY_LINES = 24


@dataclass(frozen=True, slots=True)
class Product:
    """A frequency that several lines make together on the curved fringe.

    Parameters
    ----------
    frequency_hz : float
        Where it appears, folded below half the rate [Hz].
    orders : tuple of int
        Multiple of each line, signed, in the order of the lines.
    relative : float
        Its amplitude over that of the smallest line.
    text : str
        Such as ``"2 × 31.7 Hz + 87.1 Hz"``.
    """

    frequency_hz: float
    orders: tuple[int, ...]
    relative: float
    text: str


def products(
    frequencies_hz: Sequence[float],
    depths_rad: Sequence[float],
    *,
    rate_hz: float | None = None,
    offset_rad: float = 0.1,
    highest: int | None = None,
) -> list[Product]:
    """Return harmonics and intermodulation of all lines together, the largest first.

    Parameters
    ----------
    frequencies_hz, depths_rad : sequence of float
        Lines and their phase amplitudes [Hz, rad].
    rate_hz : float, optional
        Sampling rate, for what is folded [Hz].
    offset_rad : float
        How far the working point may lie off mid-fringe [rad].
    highest : int, optional
        Largest sum of the orders' sizes; 3, or 2 for so many lines that three make too many.

    Returns
    -------
    list of Product
        Orders two to ``highest``; each is 2·Π J_|n|(m) times cos (odd) or sin (even) of the offset.
    """
    if highest is None:
        highest = 3 if len(depths_rad) <= _MANY_LINES else 2
    tables = [bessels(highest, depth) for depth in depths_rad]
    common = math.cos(offset_rad)
    smallest = min(
        2.0 * common * _size(tables, tuple(int(i == j) for j in range(len(tables))))
        for i in range(len(tables))
    )
    found = []
    for orders in _orders(len(tables), highest):
        total = sum(abs(n) for n in orders)
        signed = sum(n * f for n, f in zip(orders, frequencies_hz, strict=True))
        if total < 2 or signed < 0.0:
            continue
        size = 2.0 * _size(tables, orders) * (common if total % 2 else abs(math.sin(offset_rad)))
        relative = size / smallest if smallest > 0.0 else 0.0
        text = _text(orders, frequencies_hz)
        found.append(Product(folded(signed, rate_hz), orders, relative, text))
    return sorted(found, key=lambda product: -product.relative)


def _size(tables: Sequence[Sequence[float]], orders: Sequence[int]) -> float:
    return math.prod(abs(table[abs(n)]) for table, n in zip(tables, orders, strict=True))


def _orders(lines: int, highest: int) -> Iterator[tuple[int, ...]]:
    """Yield every set of signed orders whose sizes add to at most ``highest``."""
    if lines == 0:
        yield ()
        return
    for own in range(-highest, highest + 1):
        for others in _orders(lines - 1, highest - abs(own)):
            yield (own, *others)


def folded(frequency_hz: float, rate_hz: float | None) -> float:
    """Return where a frequency appears once it is sampled.

    Parameters
    ----------
    frequency_hz : float
        Frequency [Hz].
    rate_hz : float or None
        Sampling rate [Hz]; None leaves it where it is.

    Returns
    -------
    float
        From 0 to half the rate [Hz].
    """
    if rate_hz is None:
        return frequency_hz
    return abs(frequency_hz - rate_hz * round(frequency_hz / rate_hz))


def _text(orders: Sequence[int], frequencies_hz: Sequence[float]) -> str:
    parts: list[str] = []
    for n, frequency in sorted(zip(orders, frequencies_hz, strict=True), key=lambda p: -p[0]):
        if n:
            sign = "" if not parts and n > 0 else " + " if n > 0 else " − "
            times = f"{abs(n)} × " if abs(n) > 1 else ""
            parts.append(f"{sign}{times}{frequency:g} Hz")
    return "".join(parts)
