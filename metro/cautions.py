"""Cautions about values that are right to read and wrong to use."""

from __future__ import annotations

from typing import TYPE_CHECKING

if TYPE_CHECKING:
    from collections.abc import Mapping

    from metro.bench import Bench
    from metro.corrections import Correction

__all__ = ["bench_cautions", "wave_cautions"]

HENE_AIR_M = 632.8e-9
_PART = 1e-3
_ELECTRON_VOLT_M = (
    6.62607015e-34 * 299792458.0 / 1.602176634e-19
)  # h·c/e, exact: SI Brochure, 9th ed.
# The band gap of silicon, 1.12 eV at 300 K (S. M. Sze, Physics of Semiconductor Devices; from memory).
_SILICON_M = _ELECTRON_VOLT_M / 1.12
_INFRARED_M = 20e-6  # no interferometer's laser on a bench


def bench_cautions(bench: Bench) -> list[str]:
    """Return the cautions that a bench's values deserve.

    Parameters
    ----------
    bench : Bench
        What is known.

    Returns
    -------
    list of str
        One sentence or two each; empty where nothing is suspicious.

    References
    ----------
    632.9908 nm and its relative standard uncertainty 1.5e-6: CIPM 96 (2007) Recommendation 2;
    J. A. Stone et al., Metrologia 46 (2009) 11.
    """
    cautions = []
    wavelength = bench.get("laser.wavelength")
    # the rounded value and its neighbours in air (632.816 … 632.82 nm), well below the vacuum line
    if wavelength is not None and abs(float(wavelength.magnitude) - HENE_AIR_M) < 0.05e-9:
        cautions.append(
            "wavelength is taken as the vacuum wavelength; 632.8 nm is the rounded value in air of the"
            " red He-Ne line, in vacuum it is 632.9908 nm (relative u 1.5e-6, unstabilised), 3.0e-4 more"
        )
    if bench.in_vacuum and bench.text("air.medium") is None and bench.get("air.index") is None:
        cautions.append(
            "no air entry: the arms are taken to be in vacuum; air would make the phase 2.7e-4 larger"
        )
    elif (
        not bench.in_vacuum and bench.get("air.index") is None and bench.get("air.humidity") is None
    ):
        cautions.append("no humidity given: the air is taken to be dry; 50 % at 20 °C is 4e-7 less")
    return cautions + _converter_cautions(bench) + _photodiode_cautions(bench)


def _photodiode_cautions(bench: Bench) -> list[str]:
    """Return where a photodiode yields too much, or sees nothing at the wavelength."""
    wavelength, responsivity = (
        bench.get(key) for key in ("laser.wavelength", "photodiode.responsivity")
    )
    if wavelength is None:
        return []
    wavelength_m = float(wavelength.magnitude)
    cautions = []
    if responsivity is not None:
        electrons = float(responsivity.magnitude) * _ELECTRON_VOLT_M / wavelength_m
        if electrons > 1.0:
            cautions.append(
                f"the responsivity, {float(responsivity.magnitude):.4g} A/W, is {electrons:.3g} electrons"
                " a photon: more than 1 is an avalanche photodiode or a slip"
            )
    has_photodiode = any(key.startswith("photodiode.") for key in bench.entries)
    if wavelength_m > _SILICON_M and (has_photodiode or wavelength_m > _INFRARED_M):
        cautions.append(
            f"the wavelength, {1e6 * wavelength_m:.4g} µm, is infrared beyond 1.1 µm, where a silicon"
            " photodiode sees nothing: is the unit right?"
        )
    return cautions


def _converter_cautions(bench: Bench) -> list[str]:
    low, high, full = (bench.get(key) for key in ("fringe.low", "fringe.high", "adc.range"))
    if low is None or high is None or full is None:
        return []
    swing_v, full_v = high.magnitude - low.magnitude, full.magnitude
    if swing_v <= full_v:
        return []
    caution = (
        f"the fringe, {swing_v:.4g} V from end to end, does not fit the converter's {full_v:.4g} V: its"
        " ends will read over-range"
    )
    return [caution]


def wave_cautions(found: Mapping[str, Correction]) -> list[str]:
    """Return where strain times length is not enough for a wave.

    Parameters
    ----------
    found : mapping of str to Correction
        As :func:`metro.corrections.corrections` returns them.

    Returns
    -------
    list of str
        One sentence for each correction above a part in a thousand.
    """
    cautions = []
    travel, direction, exact = (
        found.get(name) for name in ("arm_travel_time", "direction", "proper_length")
    )
    if travel is not None and travel.number("magnitude") < 1.0 - _PART:
        size = travel.number("magnitude")
        cautions.append(f"strain times length is not enough: the arms' response is {size:.6g}")
    if direction is not None and direction.number("plus") < 1.0 - _PART:
        plus, cross = direction.number("plus"), direction.number("cross")
        cautions.append(
            f"the stages hold for a wave from above; from this direction the response is {plus:.6g} (plus),"
            f" {cross:.6g} (cross)"
        )
    if exact is not None and abs(exact.number("x_arm")) > _PART:
        cautions.append(
            f"first order leaves out {exact.number('x_arm'):.3g} of the x arm's change"
            f" and {exact.number('differential'):.3g} of the differential"
        )
    return cautions
