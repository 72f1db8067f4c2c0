"""Refractive index of air for a vacuum wavelength, as refractivity n − 1.

References
----------
P. E. Ciddor, *Refractive index of air: new equations for the visible and near infrared*, Appl. Opt.
35 (1996) 1566. K. P. Birch and M. J. Downs, *An updated Edlén equation for the refractive index of
air*, Metrologia 30 (1993) 155, corrected in Metrologia 31 (1994) 315. J. A. Stone and J. H.
Zimmerman, *Index of Refraction of Air*, NIST Engineering Metrology Toolbox, appendix A.
"""

from math import sqrt

__all__ = [
    "ciddor",
    "ciddor_u",
    "compressibility",
    "edlen",
]

_GAS_J_MOL_K = 8.314510  # the value of 1986 that Ciddor's equations were fitted with
_WATER_KG_MOL = 0.018015


def compressibility(temperature_k: float, pressure_pa: float, mole_fraction: float) -> float:
    """Return the compressibility Z of moist air.

    Parameters
    ----------
    temperature_k : float
        Temperature [K].
    pressure_pa : float
        Pressure [Pa].
    mole_fraction : float
        Mole fraction of water vapour; 1 for pure vapour.

    Returns
    -------
    float
        Compressibility.

    References
    ----------
    R. S. Davis, Metrologia 29 (1992) 67; Ciddor 1996, equation (12).
    """
    t = temperature_k - 273.15
    x = mole_fraction
    density = pressure_pa / temperature_k
    pair = (
        1.58123e-6
        + (-2.9331e-8 + 1.1043e-10 * t) * t
        + (5.707e-6 - 2.051e-8 * t) * x
        + (1.9898e-4 - 2.376e-6 * t) * x * x
    )
    return 1.0 - density * pair + density * density * (1.83e-11 - 0.765e-8 * x * x)


def ciddor(
    temperature_k: float,
    pressure_pa: float,
    mole_fraction: float,
    wavelength_m: float,
    co2: float = 450e-6,
) -> float:
    """Return the refractivity n − 1 of moist air after Ciddor.

    Parameters
    ----------
    temperature_k : float
        Temperature [K].
    pressure_pa : float
        Pressure [Pa].
    mole_fraction : float
        Mole fraction of water vapour.
    wavelength_m : float
        Vacuum wavelength [m].
    co2 : float, default 450e-6
        Mole fraction of carbon dioxide in the dry air.

    Returns
    -------
    float
        Phase refractivity.
    """
    s = 1e-12 / (wavelength_m * wavelength_m)  # wavenumber squared [µm⁻²]
    standard = 1e-8 * (5792105.0 / (238.0185 - s) + 167917.0 / (57.362 - s))
    dry = standard * (1.0 + 0.534 * (co2 - 450e-6))
    vapour = 1.022e-8 * (295.235 + (2.6422 + (-0.032380 + 0.004028 * s) * s) * s)
    dry_kg_mol = 1e-3 * (28.9635 + 12.011 * (co2 - 400e-6))
    axs = _density(288.15, 101325.0, 0.0, dry_kg_mol)
    ws = _density(293.15, 1333.0, 1.0, _WATER_KG_MOL)
    molar = pressure_pa / (
        compressibility(temperature_k, pressure_pa, mole_fraction) * _GAS_J_MOL_K * temperature_k
    )
    dry_share = molar * (1.0 - mole_fraction) * dry_kg_mol / axs
    vapour_share = molar * mole_fraction * _WATER_KG_MOL / ws
    return dry_share * dry + vapour_share * vapour


def _density(
    temperature_k: float, pressure_pa: float, mole_fraction: float, kg_mol: float
) -> float:
    """Return the density of dry air or of pure vapour in its standard state [kg/m³]."""
    z = compressibility(temperature_k, pressure_pa, mole_fraction)
    return pressure_pa * kg_mol / (z * _GAS_J_MOL_K * temperature_k)


def edlen(
    temperature_k: float,
    pressure_pa: float,
    vapour_pressure_pa: float,
    wavelength_m: float,
    co2: float = 450e-6,
    warm_water: bool = True,
) -> float:
    """Return the refractivity n − 1 of moist air after the updated Edlén equation.

    Parameters
    ----------
    temperature_k : float
        Temperature [K].
    pressure_pa : float
        Pressure [Pa].
    vapour_pressure_pa : float
        Relative humidity times saturation pressure [Pa].
    wavelength_m : float
        Vacuum wavelength [m].
    co2 : float, default 450e-6
        Mole fraction of carbon dioxide, scaled as Ciddor does; the equation is for 450e-6.
    warm_water : bool, default True
        Multiply the water term by 292.75/T, as NIST does; False leaves it as printed in 1994.
        They differ by up to 4e-7 at 50 °C in saturated air.

    Returns
    -------
    float
        Phase refractivity.
    """
    s = 1e-12 / (wavelength_m * wavelength_m)
    t = temperature_k - 273.15
    standard = 1e-8 * (8342.54 + 2406147.0 / (130.0 - s) + 15998.0 / (38.9 - s))
    standard *= 1.0 + 0.534 * (co2 - 450e-6)
    ideal = (1.0 + 1e-8 * (0.601 - 0.00972 * t) * pressure_pa) / (1.0 + 0.0036610 * t)
    water = 1e-10 * (3.7345 - 0.0401 * s) * vapour_pressure_pa
    if warm_water:
        water *= 292.75 / temperature_k
    return pressure_pa * standard * ideal / 96095.43 - water


def ciddor_u(
    temperature_k: float, pressure_pa: float, vapour_pressure_pa: float, wavelength_m: float
) -> float:
    """Return the standard uncertainty of Ciddor's equation itself, perfect inputs assumed.

    Parameters
    ----------
    temperature_k : float
        Temperature [K].
    pressure_pa : float
        Pressure [Pa].
    vapour_pressure_pa : float
        Relative humidity times saturation pressure [Pa].
    wavelength_m : float
        Vacuum wavelength [m].

    Returns
    -------
    float
        Standard uncertainty of n; 1.05e-8 at 20 °C, 101325 Pa, dry, and growing away from there.

    References
    ----------
    NIST Engineering Metrology Toolbox, *Index of Refraction of Air*, appendix A-V, whose expanded
    uncertainty (k = 2) is halved here.
    """
    t = temperature_k - 273.15
    micrometres = wavelength_m * 1e6
    dry = 0.003 * pressure_pa / (t + 273.0)
    off = 1e-5 * (pressure_pa - 1e5)
    dry_squared = dry * dry * (4.0 + 600.0 * off * off + 0.06 * (t - 20.0) * (t - 20.0))
    short = 6e-6 / (micrometres * micrometres * micrometres * micrometres)
    wet_squared = vapour_pressure_pa * vapour_pressure_pa * (8e-4 * 8e-4 + short * short)
    return 0.5e-8 * sqrt(dry_squared + wet_squared)
