"""What may fall on a line: the mains, other lines, their harmonics and what they make together."""

from __future__ import annotations

from typing import TYPE_CHECKING

from metro.intermodulation import Product, folded, products

if TYPE_CHECKING:
    from collections.abc import Iterator, Sequence

__all__ = ["HIGHEST_HARMONIC", "MAINS_WANDER", "collisions"]

MAINS_WANDER = 0.004
"""Relative wander of the mains: ±200 mHz at 50 Hz is the widest that the European grid runs at for
long (Regulation (EU) 2017/1485, annex III; from memory)."""
HIGHEST_HARMONIC = 7
"""Of a line that another may fall on: an actuator's own curvature makes them too."""
_MAINS_ORDERS = 20
_FOLDED_ORDERS = 9  # of the mains, from above half the rate; an anti-alias filter leaves less
_CLOCK = 1e-4  # two clocks of a board and a generator, each good to some tens of ppm
_RESOLUTION = 3.0  # reciprocal durations that two lines must stay apart to be told apart


def collisions(
    frequencies_hz: Sequence[float],
    depths_rad: Sequence[float],
    duration_s: float,
    *,
    mains_hz: Sequence[float] = (50.0, 60.0),
    rate_hz: float | None = None,
    matters: float = 1e-4,
    offset_rad: float = 0.1,
) -> list[list[str]]:
    """Return for each line what falls on it.

    Parameters
    ----------
    frequencies_hz, depths_rad : sequence of float
        Lines and their phase amplitudes [Hz, rad].
    duration_s : float
        Duration of a recording [s].
    mains_hz : sequence of float
        Mains frequencies to keep away from [Hz].
    rate_hz : float, optional
        Sampling rate, for what is folded [Hz].
    matters : float
        Smallest relative amplitude of a product that is named.
    offset_rad : float
        How far the working point may lie off mid-fringe [rad], for products of even order.

    Returns
    -------
    list of list of str
        Reasons for distrust, by line; empty where nothing was found.
    """
    made = products(frequencies_hz, depths_rad, rate_hz=rate_hz, offset_rad=offset_rad)
    return [
        [
            *_mains(frequency, duration_s, mains_hz, rate_hz),
            *_neighbours(place, frequencies_hz, duration_s, rate_hz),
            *_on(place, frequency, made, duration_s, matters),
        ]
        for place, frequency in enumerate(frequencies_hz)
    ]


def _apart(duration_s: float, frequency_hz: float) -> float:
    """Return how far two frequencies must be apart [Hz]."""
    return _RESOLUTION / duration_s + _CLOCK * frequency_hz


def _mains(
    frequency_hz: float, duration_s: float, mains_hz: Sequence[float], rate_hz: float | None
) -> Iterator[str]:
    for mains in mains_hz:
        for order in range(1, _MAINS_ORDERS + 1):
            if rate_hz is not None and order * mains > 0.5 * rate_hz and order > _FOLDED_ORDERS:
                continue
            there = folded(order * mains, rate_hz)
            away = abs(frequency_hz - there)
            if away < MAINS_WANDER * order * mains + _apart(duration_s, frequency_hz):
                name = f"{order} × {mains:g} Hz" if order > 1 else f"{mains:g} Hz"
                yield f"the mains' {name} is {_hertz(away)} away and wanders over it"


def _neighbours(
    place: int, frequencies_hz: Sequence[float], duration_s: float, rate_hz: float | None
) -> Iterator[str]:
    frequency = frequencies_hz[place]
    for other_place, other in enumerate(frequencies_hz):
        if other_place == place:
            continue
        for order in range(1, HIGHEST_HARMONIC + 1):
            away = abs(frequency - folded(order * other, rate_hz))
            if away < _apart(duration_s, frequency):
                name = f"{order} × {other:g} Hz" if order > 1 else f"the line at {other:g} Hz"
                yield f"{name} falls on it ({_hertz(away)} away)"


def _on(
    place: int, frequency_hz: float, made: Sequence[Product], duration_s: float, matters: float
) -> Iterator[str]:
    for product in made:
        single = sum(1 for order in product.orders if order) == 1  # told as a harmonic already
        itself = product.orders[place] != 0 and single
        if product.relative < matters or single or itself:
            continue
        away = abs(product.frequency_hz - frequency_hz)
        if away < _apart(duration_s, frequency_hz):
            yield (
                f"{product.text} falls on it ({_hertz(away)} away), {100 * product.relative:.2g} % of a"
                " line"
            )


def _hertz(away_hz: float) -> str:
    return f"{round(away_hz, 6):.3g} Hz"  # 0, not the rounding of a product
