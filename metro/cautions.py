"""Cautions about values that are right to read and wrong to use."""

from __future__ import annotations

from typing import TYPE_CHECKING

if TYPE_CHECKING:
    from metro.bench import Bench

__all__ = ["bench_cautions"]

HENE_AIR_M = 632.8e-9
HENE_VACUUM_M = 632.9908e-9


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
    return cautions + _converter_cautions(bench)


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
