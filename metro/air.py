"""Refractive index of air, with values that carry units or uncertainties."""

from __future__ import annotations

from typing import TYPE_CHECKING

from metro.air_index import solve_air
from metro.air_state import AirState, check_equation, check_state
from metro.elementwise import elementwise
from metro.measured import Measured

if TYPE_CHECKING:
    from metro.units import Quantity

__all__ = ["index_measured", "refractive_index"]


def refractive_index(
    temperature: Quantity | str,
    pressure: Quantity | str,
    humidity: Quantity | float | str,
    wavelength: Quantity | str,
    co2: Quantity | float | str = "450 umol/mol",
    equation: str = "ciddor",
) -> Quantity:
    """Return the phase refractive index of moist air.

    Parameters
    ----------
    temperature : Quantity or str
        −40 … 100 °C; scalar or array.
    pressure : Quantity or str
        10 … 140 kPa; scalar or array.
    humidity : Quantity, float or str
        Relative humidity, ``0.5`` or ``"50%"``; 0 … 1. Below 0 °C it is over ice.
    wavelength : Quantity or str
        Vacuum wavelength, 300 … 1700 nm.
    co2 : Quantity, float or str, default "450 umol/mol"
        Mole fraction of carbon dioxide, 0 … 2000 µmol/mol.
    equation : str, default "ciddor"
        ``"ciddor"``, ``"edlen"`` (as NIST uses it) or ``"edlen1994"`` (as printed).

    Returns
    -------
    Quantity
        Index n, dimensionless.

    Raises
    ------
    MetroError
        If an argument has the wrong dimension or is out of range.

    References
    ----------
    P. E. Ciddor, Appl. Opt. 35 (1996) 1566; K. P. Birch and M. J. Downs, Metrologia 30 (1993) 155
    and 31 (1994) 315; NIST Engineering Metrology Toolbox, *Index of Refraction of Air*.
    """
    from metro.units import quantity, si

    check_equation(equation)
    t = si(temperature, "temperature", "K")
    p = si(pressure, "pressure", "Pa")
    rh = si(humidity, "humidity", "1", minimum=0.0, maximum=1.0)
    lam = si(wavelength, "wavelength", "m")
    xc = si(co2, "co2", "1")

    def index(t_k: float, p_pa: float, rh: float, lam_m: float, xc: float) -> float:
        state = AirState(t_k, p_pa, rh, lam_m, xc)
        check_state(state)
        return 1.0 + state.refractivity(equation)

    return quantity(elementwise(index, t, p, rh, lam, xc), "1")


def index_measured(
    temperature: Measured,
    pressure: Measured,
    humidity: Measured,
    wavelength: Measured,
    *,
    co2: Measured | None = None,
    equation: str = "ciddor",
    kind: str = "relative",
) -> Measured:
    """Return the index of air with its standard uncertainty, from measured inputs.

    Parameters
    ----------
    temperature, pressure : Measured
        In K and Pa.
    humidity : Measured
        As ``kind`` says.
    wavelength : Measured
        Vacuum wavelength [m].
    co2 : Measured, optional
        Mole fraction of carbon dioxide; 450e-6 where not given.
    equation : str, default "ciddor"
        Name of the equation.
    kind : str, default "relative"
        Which of :data:`HUMIDITY_KINDS` the humidity is.

    Returns
    -------
    Measured
        Index n; its uncertainty takes in the inputs and the equation itself.

    Raises
    ------
    MetroError
        If a value is out of range.
    """
    inputs = {
        "temperature": temperature,
        "pressure": pressure,
        "humidity": humidity,
        "wavelength": wavelength,
        "co2": co2 if co2 is not None else Measured.of(450e-6, "1"),
    }
    return solve_air(inputs, equation, kind).index
