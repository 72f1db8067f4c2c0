"""The state of air and of light in it: what may be asked, and what the equations say."""

from __future__ import annotations

import math
from dataclasses import dataclass

from metro.errors import MetroError
from metro.kernel import air as kernel
from metro.kernel.humidity import (
    enhancement_factor,
    mole_fraction,
    saturation_pressure_pa,
    vapour_pressure_pa,
)

__all__ = [
    "EQUATIONS",
    "HUMIDITY_KINDS",
    "LIMITS",
    "AirState",
    "check_equation",
    "check_state",
    "check_vapour",
    "range_remarks",
]

EQUATIONS = {
    "ciddor": "Ciddor, Appl. Opt. 35 (1996) 1566",
    "edlen": "Birch & Downs, Metrologia 31 (1994) 315, water term times 292.75/T (NIST)",
    "edlen1994": "Birch & Downs, Metrologia 31 (1994) 315, water term as printed",
}
"""Source of each equation, by its name."""

HUMIDITY_KINDS = ("relative", "dew point", "vapour pressure", "mole fraction")

# What the program computes at all: unit, lowest and highest.
LIMITS = {
    "temperature": ("K", 233.15, 373.15),
    "pressure": ("Pa", 10e3, 140e3),
    "wavelength": ("m", 300e-9, 1700e-9),
}
# Where the updated Edlén equation was fitted (Birch & Downs 1993, from memory): a laboratory.
_EDLEN_RANGE = {
    "temperature": (283.15, 303.15),
    "pressure": (70e3, 120e3),
    "wavelength": (350e-9, 650e-9),
}
# Ciddor 1996, abstract and section 4: the range that the paper itself claims.
_CIDDOR_RANGE = {
    "temperature": (233.15, 373.15),
    "pressure": (80e3, 120e3),
    "wavelength": (300e-9, 1690e-9),
}


@dataclass(frozen=True, slots=True)
class AirState:
    """Air, and the light in it, as plain SI numbers.

    Parameters
    ----------
    temperature_k : float
        Temperature [K].
    pressure_pa : float
        Pressure [Pa].
    humidity : float
        Relative humidity (fraction), dew point [K], vapour pressure [Pa] or mole fraction.
    wavelength_m : float
        Vacuum wavelength [m].
    co2 : float
        Mole fraction of carbon dioxide.
    kind : str
        Which of :data:`HUMIDITY_KINDS` ``humidity`` is.
    """

    temperature_k: float
    pressure_pa: float
    humidity: float
    wavelength_m: float
    co2: float = 450e-6
    kind: str = "relative"

    @property
    def vapour_pa(self) -> float:
        """Relative humidity times saturation pressure [Pa]."""
        if self.kind == "relative":
            return self.humidity * saturation_pressure_pa(self.temperature_k)
        if self.kind == "dew point":
            # At the dew point the same moles of vapour are saturated, with that point's factor.
            ratio = enhancement_factor(self.humidity, self.pressure_pa)
            ratio /= enhancement_factor(self.temperature_k, self.pressure_pa)
            return ratio * saturation_pressure_pa(self.humidity)
        if self.kind == "vapour pressure":
            return self.humidity
        return vapour_pressure_pa(self.temperature_k, self.pressure_pa, self.humidity)

    def refractivity(self, equation: str) -> float:
        """Return n − 1 after an equation.

        Parameters
        ----------
        equation : str
            A name of :data:`EQUATIONS`.

        Returns
        -------
        float
            Phase refractivity.
        """
        vapour = self.vapour_pa
        t, p, lam, co2 = self.temperature_k, self.pressure_pa, self.wavelength_m, self.co2
        if equation == "ciddor":
            # where vapour nears the total pressure the enhancement factor, a fit, overshoots
            return kernel.ciddor(t, p, min(1.0, mole_fraction(t, p, vapour)), lam, co2)
        return kernel.edlen(t, p, vapour, lam, co2, equation == "edlen")

    def equation_u(self, equation: str) -> float:
        """Return the standard uncertainty of an equation, perfect inputs assumed.

        Parameters
        ----------
        equation : str
            A name of :data:`EQUATIONS`.

        Returns
        -------
        float
            Standard uncertainty of n.

        Notes
        -----
        Ciddor: as the NIST toolbox states it. Edlén: that, the 1e-8 of the paper (3e-8 at three
        standard deviations, from memory), and the distance from Ciddor as half of a rectangular
        distribution, which grows where it leaves the laboratory. Doubled outside the range that
        the authors claim, which is our own prudence.
        """
        u = kernel.ciddor_u(self.temperature_k, self.pressure_pa, self.vapour_pa, self.wavelength_m)
        if equation != "ciddor":
            apart = self.refractivity(equation) - self.refractivity("ciddor")
            u = math.sqrt(u * u + 1e-16 + apart * apart / 3.0)
        return 2.0 * u if _outside(self, equation) else u


def check_equation(equation: str) -> None:
    """Refuse a name that is not in :data:`EQUATIONS`.

    Parameters
    ----------
    equation : str
        The name given.

    Raises
    ------
    MetroError
        If the name is unknown; the message lists the known ones.
    """
    if equation not in EQUATIONS:
        known = " or ".join(repr(name) for name in EQUATIONS)
        raise MetroError(f"equation must be {known}, got {equation!r}")


def check_state(state: AirState) -> None:
    """Refuse air outside what the program computes, or that cannot exist.

    Parameters
    ----------
    state : AirState
        Temperature, pressure, humidity, wavelength, carbon dioxide.

    Raises
    ------
    MetroError
        If a value is out of range; the message names it, the range and the value.
    """
    for name, (unit, low, high) in LIMITS.items():
        _within(name, _value(state, name), low, high, " " + unit)
    _within("co2", state.co2, 0.0, 2e-3, " mol/mol")
    if state.kind == "relative":
        _within("humidity", state.humidity, 0.0, 1.0, "")
    elif state.kind == "mole fraction":
        _within("mole fraction", state.humidity, 0.0, 1.0, "")
    elif state.kind == "dew point":
        _within("dew point", state.humidity, 200.0, state.temperature_k, " K")
    else:
        _within("vapour pressure", state.humidity, 0.0, state.pressure_pa, " Pa")
    check_vapour(state)


def check_vapour(state: AirState) -> None:
    """Refuse more vapour than air of this temperature and pressure holds.

    Parameters
    ----------
    state : AirState
        Its ranges are taken as checked.

    Raises
    ------
    MetroError
        If the vapour is over-saturated or exceeds the total pressure.
    """
    # a per mille is left for instruments that read saturation a little differently
    name = "humidity" if state.kind == "relative" else state.kind
    saturated = 1.001 * saturation_pressure_pa(state.temperature_k)
    if state.vapour_pa > saturated:
        raise MetroError(
            f"{name} must leave the air below saturation, {saturated:.6g} Pa of vapour at"
            f" {state.temperature_k:.6g} K, got {state.vapour_pa:.6g} Pa"
        )
    if state.vapour_pa > 1.001 * state.pressure_pa:
        raise MetroError(
            f"{name} must leave the vapour below the total pressure, {state.pressure_pa:.6g} Pa,"
            f" got {state.vapour_pa:.6g} Pa of vapour"
        )


def range_remarks(state: AirState, equation: str) -> tuple[str, ...]:
    """Return where a state leaves the range that an equation's authors claim.

    Parameters
    ----------
    state : AirState
        The state of the air.
    equation : str
        A name of :data:`EQUATIONS`.

    Returns
    -------
    tuple of str
        One sentence each; empty inside the range.
    """
    remarks = [
        f"{name} {_value(state, name):.6g} {unit} is outside the range {low:.6g} … {high:.6g} {unit}"
        " of this equation; its uncertainty is stated larger"
        for name, unit, low, high in _outside(state, equation)
    ]
    if state.temperature_k < 273.15 and state.kind == "relative" and state.humidity > 0.0:
        remarks.append("relative humidity below 0 °C is taken over ice")
    return tuple(remarks)


def _outside(state: AirState, equation: str) -> list[tuple[str, str, float, float]]:
    ranges = _CIDDOR_RANGE if equation == "ciddor" else _EDLEN_RANGE
    return [
        (name, LIMITS[name][0], low, high)
        for name, (low, high) in ranges.items()
        if not _inside(_value(state, name), low, high)
    ]


def _value(state: AirState, name: str) -> float:
    return {
        "temperature": state.temperature_k,
        "pressure": state.pressure_pa,
        "wavelength": state.wavelength_m,
    }[name]


def _within(name: str, value: float, low: float, high: float, unit: str) -> None:
    if not _inside(value, low, high):
        raise MetroError(f"{name} must be {low:.10g} … {high:.10g}{unit}, got {value:.10g}{unit}")


def _inside(value: float, low: float, high: float) -> bool:
    """Return whether a value is in a closed range; −40 °C and 1700 nm are, whatever rounding says."""
    slack = 1e-12 * high
    return low - slack <= value <= high + slack
