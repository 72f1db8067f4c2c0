"""The index of air from measured inputs: uncertainty, sensitivities, wavelength in air."""

from __future__ import annotations

import math
from dataclasses import dataclass, replace
from typing import Any

from metro.air_state import (
    EQUATIONS,
    HUMIDITY_KINDS,
    AirState,
    check_equation,
    check_state,
    range_remarks,
)
from metro.errors import MetroError
from metro.measured import Measured

__all__ = ["AirResult", "solve_air"]


@dataclass(frozen=True, slots=True)
class AirResult:
    """The refractive index of air, and what it rests on.

    Parameters
    ----------
    index : Measured
        Phase index n.
    wavelength_in_air : Measured
        Vacuum wavelength over n [m].
    equation : str
        Name of the equation.
    equation_u : float
        Standard uncertainty of the equation itself.
    sensitivities : dict of str to Measured
        Derivative of n by each input, SI units.
    contributions : dict of str to float
        Standard uncertainty of n from each input and from the equation.
    remarks : tuple of str
        Where the equation is outside its own range, and what was assumed.
    """

    index: Measured
    wavelength_in_air: Measured
    equation: str
    equation_u: float
    sensitivities: dict[str, Measured]
    contributions: dict[str, float]
    remarks: tuple[str, ...]

    @property
    def reference(self) -> str:
        """Where the equation is published."""
        return EQUATIONS[self.equation]

    def to_dict(self) -> dict[str, Any]:
        """Return the JSON form.

        Returns
        -------
        dict
            ``index``, ``equation``, ``wavelength_in_air``, ``sensitivities``, ``contributions`` (standard
            uncertainty of n from each input and from the equation), ``reference``, ``remarks``.
        """
        return {
            "index": self.index,
            "equation": self.equation,
            "wavelength_in_air": self.wavelength_in_air,
            "sensitivities": self.sensitivities,
            "contributions": {name: Measured.of(u, "1") for name, u in self.contributions.items()},
            "reference": self.reference,
            "remarks": list(self.remarks),
        }


def solve_air(inputs: dict[str, Measured], equation: str, kind: str = "relative") -> AirResult:
    """Return the index of air, the wavelength in it, sensitivities and contributions.

    Parameters
    ----------
    inputs : dict of str to Measured
        ``temperature`` [K], ``pressure`` [Pa], ``humidity`` (as ``kind`` says), ``wavelength`` [m] and
        ``co2`` (mole fraction).
    equation : str
        Name of the equation.
    kind : str, default "relative"
        Which of :data:`HUMIDITY_KINDS` the humidity is.

    Returns
    -------
    AirResult
        Index and what it rests on.

    Raises
    ------
    MetroError
        If a value is out of range or a name unknown.
    """
    check_equation(equation)
    state = _state(inputs, kind)
    refractivity = state.refractivity(equation)
    slopes = {name: _slope(state, name, equation) for name in _FIELDS}
    contributions = {
        name: abs(slopes[name]) * float(inputs[name].u_magnitude)
        for name in _FIELDS
        if inputs[name].u_magnitude is not None
    }
    contributions["equation"] = state.equation_u(equation)
    u = math.sqrt(sum(c * c for c in contributions.values()))
    index = Measured.of(1.0 + refractivity, "1", u)
    return AirResult(
        index=index,
        wavelength_in_air=_wavelength_in_air(inputs["wavelength"], index, slopes, contributions),
        equation=equation,
        equation_u=contributions["equation"],
        sensitivities=_with_units(slopes, kind),
        contributions=contributions,
        remarks=(*range_remarks(state, equation), *_exact_inputs(inputs)),
    )


def _exact_inputs(inputs: dict[str, Measured]) -> tuple[str, ...]:
    exact = [name for name in _FIELDS if inputs[name].u_magnitude is None]
    if not exact:
        return ()
    return (f"no uncertainty was given for {', '.join(exact)}: the u of n takes them as exact",)


# Each input's field of the state, and the step for its derivative: large enough for twelve digits.
_FIELDS = {
    "temperature": ("temperature_k", 0.05),
    "pressure": ("pressure_pa", 50.0),
    "humidity": ("humidity", 0.0),
    "wavelength": ("wavelength_m", 1e-11),
    "co2": ("co2", 1e-5),
}


_HUMIDITY_STEPS = {
    "relative": (1e-3, "1"),
    "dew point": (0.05, "1/K"),
    "vapour pressure": (1.0, "1/Pa"),
    "mole fraction": (1e-5, "1"),
}


def _slope(state: AirState, name: str, equation: str) -> float:
    """Return ∂n/∂input by a central difference of the refractivity."""
    field, step = _FIELDS[name]
    step = _HUMIDITY_STEPS[state.kind][0] if name == "humidity" else step
    middle = getattr(state, field)
    above = replace(state, **{field: middle + step}).refractivity(equation)
    below = replace(state, **{field: middle - step}).refractivity(equation)
    return (above - below) / (2.0 * step)


def _with_units(slopes: dict[str, float], kind: str) -> dict[str, Measured]:
    units = {"temperature": "1/K", "pressure": "1/Pa", "wavelength": "1/m", "co2": "1"}
    units["humidity"] = _HUMIDITY_STEPS[kind][1]
    return {name: Measured.of(slope, units[name]) for name, slope in slopes.items()}


def _wavelength_in_air(
    vacuum: Measured, index: Measured, slopes: dict[str, float], contributions: dict[str, float]
) -> Measured:
    """Return λ/n; the wavelength's own uncertainty acts twice, on λ and through dispersion."""
    lam, n = float(vacuum.magnitude), float(index.magnitude)
    rest = sum(c * c for name, c in contributions.items() if name != "wavelength")
    direct = (1.0 - lam * slopes["wavelength"] / n) * float(vacuum.u_magnitude or 0.0)
    u = math.sqrt(direct * direct + rest * (lam / n) ** 2) / n
    return Measured.of(lam / n, "m", u)


def _state(inputs: dict[str, Measured], kind: str) -> AirState:
    if kind not in HUMIDITY_KINDS:
        raise MetroError(f"humidity must be one of {', '.join(HUMIDITY_KINDS)}, got {kind!r}")
    numbers = {name: float(value.magnitude) for name, value in inputs.items()}
    state = AirState(
        numbers["temperature"],
        numbers["pressure"],
        numbers["humidity"],
        numbers["wavelength"],
        numbers["co2"],
        kind,
    )
    check_state(state)
    return state
