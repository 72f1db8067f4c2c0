"""Water vapour in air: saturation pressure, enhancement factor and the ways to state humidity.

"Vapour pressure" is here what a hygrometer's relative humidity means: relative humidity times the
saturation pressure of pure water. The mole fraction is that times the enhancement factor over the
total pressure.
"""

from math import exp, sqrt

__all__ = [
    "enhancement_factor",
    "mole_fraction",
    "saturation_pressure_pa",
    "vapour_pressure_pa",
]

# IAPWS-IF97 region 4 (IAPWS R7-97, 2012, table 34), in pascal and kelvin
_K1, _K2, _K3, _K4, _K5 = (
    1167.0521452767,
    -724213.16703206,
    -17.073846940092,
    12020.82470247,
    -3232555.0322333,
)
_K6, _K7, _K8, _K9, _K10 = (
    14.91510861353,
    -4823.2657361591,
    405113.40542057,
    -0.23855557567849,
    650.17534844798,
)

# pressure and temperature of the triple point, and the exponents' factors (over ice)
_TRIPLE_PA, _TRIPLE_K, _ICE_1, _ICE_2 = 611.657, 273.16, -13.928169, 34.7078238


def saturation_pressure_pa(temperature_k: float) -> float:
    """Return the saturation pressure of water vapour, over ice below the triple point.

    Parameters
    ----------
    temperature_k : float
        Temperature [K], 200 … 640.

    Returns
    -------
    float
        Pressure [Pa].

    References
    ----------
    Over water: IAPWS R7-97(2012), *Industrial Formulation 1997*, region 4, equation (30). Its
    square root is B² − 4AC; a copy in circulation prints a plus. Over ice: W. Wagner, A. Saul and
    A. Pruss, J. Phys. Chem. Ref. Data 23 (1994) 515, equation (2.21) (from memory), as the NIST
    *Engineering Metrology Toolbox* uses it.
    """
    if temperature_k < _TRIPLE_K:
        theta = temperature_k / _TRIPLE_K
        ice = _ICE_1 * (1.0 - theta**-1.5) + _ICE_2 * (1.0 - theta**-1.25)
        return _TRIPLE_PA * exp(ice)
    omega = temperature_k + _K9 / (temperature_k - _K10)
    a = (omega + _K1) * omega + _K2
    b = (_K3 * omega + _K4) * omega + _K5
    c = (_K6 * omega + _K7) * omega + _K8
    x = 2.0 * c / (-b + sqrt(b * b - 4.0 * a * c))
    return 1e6 * x * x * x * x


def enhancement_factor(temperature_k: float, pressure_pa: float) -> float:
    """Return how much more vapour moist air holds than a vacuum, α + βp + γt².

    Parameters
    ----------
    temperature_k : float
        Temperature [K].
    pressure_pa : float
        Total pressure [Pa].

    Returns
    -------
    float
        Factor, near 1.004 in a room.

    References
    ----------
    P. E. Ciddor, Appl. Opt. 35 (1996) 1566, appendix C; t is squared, which copies in
    circulation forget.
    """
    t = temperature_k - 273.15
    return 1.00062 + 3.14e-8 * pressure_pa + 5.6e-7 * t * t


def mole_fraction(temperature_k: float, pressure_pa: float, vapour_pressure_pa: float) -> float:
    """Return the mole fraction of water vapour.

    Parameters
    ----------
    temperature_k : float
        Temperature at which the vapour pressure is stated [K].
    pressure_pa : float
        Total pressure [Pa].
    vapour_pressure_pa : float
        Relative humidity times saturation pressure [Pa].

    Returns
    -------
    float
        Moles of vapour per mole of moist air.
    """
    return enhancement_factor(temperature_k, pressure_pa) * vapour_pressure_pa / pressure_pa


def vapour_pressure_pa(temperature_k: float, pressure_pa: float, mole_fraction: float) -> float:
    """Return the vapour pressure that a mole fraction means.

    Parameters
    ----------
    temperature_k : float
        Temperature [K].
    pressure_pa : float
        Total pressure [Pa].
    mole_fraction : float
        Moles of vapour per mole of moist air.

    Returns
    -------
    float
        Relative humidity times saturation pressure [Pa].
    """
    return mole_fraction * pressure_pa / enhancement_factor(temperature_k, pressure_pa)
