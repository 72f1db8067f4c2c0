"""The stages of the signal chain: their order, their units, and how they are given."""

from __future__ import annotations

from typing import TYPE_CHECKING, Any

from metro.bench_keys import OPTIONS

if TYPE_CHECKING:
    from metro.units import Quantity

__all__ = ["STAGES", "UNITS", "stage_si", "ways_to_give"]


UNITS = {
    "strain": "1",
    "displacement": "m",
    "phase": "rad",
    "fringes": "1",
    "power": "W",
    "current": "A",
    "voltage": "V",
    "counts": "1",
}

"""Unit of each stage, in the order the signal passes them."""


STAGES = tuple(UNITS)


def stage_si(stage: str, value: Quantity | float | str, name: str = "") -> Any:  # noqa: ANN401  # float or ndarray
    """Return the plain number of a value given for a stage.

    Parameters
    ----------
    stage : str
        Name of the stage.
    value : Quantity, float or str
        As people give it; bare only for strain, fringes and counts.
    name : str, optional
        What messages call it; the stage's name if empty.

    Returns
    -------
    float or ndarray
        In the stage's unit of :data:`UNITS`.

    Raises
    ------
    MetroError
        If the dimension is another or the value not finite.
    """
    from metro.units import si

    unit = {"fringes": "fringe", "counts": "count"}.get(stage, UNITS[stage])
    if str(getattr(value, "units", "")) == "dimensionless":
        unit = UNITS[stage]
    return si(value, name or stage, unit)


def ways_to_give(*keys: str) -> str:
    """Return how a person gives one of several values: its option, or its place in the file.

    Parameters
    ----------
    *keys : str
        ``section.key``, alternatives of each other.

    Returns
    -------
    str
        Such as ``"--responsivity or --quantum-efficiency"``.
    """
    options = {key: f"--{option}" for option, key in OPTIONS.items()}
    places = [
        options.get(key) or "[{}] {} in the bench file".format(*key.split(".")) for key in keys
    ]
    return " or ".join(places)
