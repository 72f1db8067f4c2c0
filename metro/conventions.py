"""What the numbers mean, printed with every result."""

from __future__ import annotations

import math
from typing import TYPE_CHECKING

from metro.bench_optics import phase_trips
from metro.links import EXTREME_SINE

if TYPE_CHECKING:
    from metro.chain import Chain

__all__ = ["conventions"]


def conventions(chain: Chain) -> dict[str, str]:
    """Return what the numbers of a chain mean, by the name of what they are.

    Parameters
    ----------
    chain : Chain
        The signal chain at its working point.

    Returns
    -------
    dict of str to str
        One line each.
    """
    bench = chain.bench
    trips = f"N = {phase_trips(bench):.6g} round trips"
    if bench.get("arms.input_reflectance") is not None:
        trips += " (phase gain of the Fabry–Perot arms)"
    sine = math.sin(chain.working_phase_rad)
    slope = (
        "an extreme"
        if abs(sine) < EXTREME_SINE
        else "rising slope"
        if sine < 0.0
        else "falling slope"
    )
    return {
        "stages": "changes about the working point, signed, linear, zero to peak",
        "strain": "gravitational-wave amplitude h: the arms change by +hL/2 and −hL/2, together hL",
        "displacement": "differential arm length, positive when the x arm grows",
        "phase": f"4π·N·n·x/λ, unwrapped, with {trips}, {_index(chain)} and λ in vacuum",
        "fringes": "phase over 2π",
        "power": "on this photodiode; the mean at mid-fringe is what --power gives",
        "working_point": f"φ = {chain.working_phase_rad:.6g} rad from this detector's maximum, {slope}",
        "noise": "one-sided amplitude density of differential displacement",
        "snr": "A/√(S/T), S one-sided, over the averaging time",
        "uncertainty": "u is the standard uncertainty from the u of the bench's values; null where none",
    }


def _index(chain: Chain) -> str:
    bench = chain.bench
    given = bench.get("air.index")
    if given is not None:
        return f"n = {float(given.magnitude):.9f} (as given)"
    if bench.in_vacuum:
        return "n = 1 (arms in vacuum)"
    from metro.air_state import EQUATIONS

    equation = EQUATIONS[bench.text("air.equation") or "ciddor"]
    if bench.get("laser.wavelength") is None:
        return f"n of air ({equation}), which needs a wavelength,"
    return f"n = {float(bench.index().magnitude):.9f} ({equation})"
