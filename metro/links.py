"""The links between the stages of the signal chain that a bench determines."""

from __future__ import annotations

import math
from dataclasses import dataclass
from typing import TYPE_CHECKING

from metro.bench_optics import contrast, phase_trips, responsivity
from metro.kernel import photodiode
from metro.kernel.phase import phase_per_metre
from metro.stages import STAGES, ways_to_give

if TYPE_CHECKING:
    from collections.abc import Callable

    from metro.bench import Bench

__all__ = ["EXTREME_SINE", "Link", "Links", "bench_links"]


EXTREME_SINE = 1e-9
"""Below this sine of its phase a working point counts as an extreme of the fringe."""


@dataclass(frozen=True, slots=True)
class Link:
    """What turns a change at one stage into a change at another, about the working point.

    Parameters
    ----------
    start, end : str
        Names of the stages.
    gain : float
        Change at ``end`` per change at ``start``, in the units of :data:`metro.stages.UNITS`; 0 at an
        extreme of the fringe.
    effects : dict of str to float
        By input of the bench: relative change of the gain for one standard uncertainty of the input,
        signed, so that an input that acts twice adds up as it should.
    law : str
        ``"linear"``, or ``"length"`` (exact proper length) or ``"fringe"`` (cosine) where the exact
        relation is another.
    half_height : float
        For the fringe law, (high−low)/2 in the unit of ``end``.
    """

    start: str
    end: str
    gain: float
    effects: dict[str, float]
    law: str = "linear"
    half_height: float = 0.0


@dataclass(frozen=True, slots=True)
class Links:
    """The links of a bench, and what keeps the others unknown.

    Parameters
    ----------
    known : tuple of Link
        No two ways lead from one stage to another.
    missing : dict of str to str
        By stage whose link from the stage before is unknown: what to give.
    remarks : tuple of str
        What was taken for granted.
    """

    known: tuple[Link, ...]
    missing: dict[str, str]
    remarks: tuple[str, ...]


def bench_links(bench: Bench, working_phase_rad: float) -> Links:
    """Return the links that a bench determines at a working point.

    Parameters
    ----------
    bench : Bench
        What is known.
    working_phase_rad : float
        Phase of the working point [rad].

    Returns
    -------
    Links
        Those known, and what the others need.

    Raises
    ------
    BenchError
        If an air entry is incomplete.
    """
    makers: tuple[Callable[[Bench, float], Link | str], ...] = (
        _strain_link,
        _phase_link,
        _fringes_link,
        _power_link,
        _current_link,
        _voltage_link,
        _counts_link,
    )
    made = {
        end: maker(bench, working_phase_rad) for end, maker in zip(STAGES[1:], makers, strict=True)
    }
    known = {end: link for end, link in made.items() if isinstance(link, Link)}
    missing = {end: reason for end, reason in made.items() if isinstance(reason, str)}
    measured = _measured_fringe_link(bench, working_phase_rad)
    remarks = () if measured is None else _join_measured_fringe(measured, known)
    return Links(tuple(known.values()), missing, remarks)


def _join_measured_fringe(measured: Link, known: dict[str, Link]) -> tuple[str, ...]:
    """Let measured extremes stand for what power, responsivity and transimpedance predict."""
    remarks: tuple[str, ...] = ()
    if "current" in known and "voltage" in known and "power" in known:
        predicted = known["power"].gain * known["current"].gain * known["voltage"].gain
        if abs(predicted - measured.gain) > 0.1 * abs(measured.gain):
            remark = (
                f"power, responsivity and transimpedance predict a slope of {predicted:.3g} V/rad, the"
                f" extremes give {measured.gain:.3g} V/rad; the extremes are used"
            )
            remarks = (remark,)
        del known["power"]  # it would be a second way from phase to voltage
    known["measured voltage"] = measured
    return remarks


def _effects(bench: Bench, **powers: float) -> dict[str, float]:
    """Return the effects of inputs that enter the gain as powers."""
    effects = {}
    for name, power in powers.items():
        key = name.replace("__", ".")
        u = bench.u(key)
        if u:
            effects[key] = power * u / bench.magnitude(key)
    return effects


def _strain_link(bench: Bench, _phase: float) -> Link | str:
    if bench.get("arms.length") is None:
        return ways_to_give("arms.length")
    length = bench.magnitude("arms.length")
    return Link("strain", "displacement", length, _effects(bench, arms__length=1.0), "length")


def _phase_link(bench: Bench, _phase: float) -> Link | str:
    if bench.get("laser.wavelength") is None:
        return ways_to_give("laser.wavelength")
    wavelength, index = bench.magnitude("laser.wavelength"), bench.index()
    n = float(index.magnitude)
    gain = phase_per_metre(wavelength, n, phase_trips(bench))
    effects = _effects(bench, laser__wavelength=-1.0)
    if index.u_magnitude:
        effects["air.index"] = float(index.u_magnitude) / n
    return Link("displacement", "phase", gain, effects)


def _fringes_link(_bench: Bench, _phase: float) -> Link | str:
    return Link("phase", "fringes", 0.5 / math.pi, {})


def _power_link(bench: Bench, phase: float) -> Link | str:
    if bench.get("laser.power") is None:
        return ways_to_give("laser.power")
    half = bench.magnitude("laser.power") * contrast(bench)
    effects = _effects(bench, laser__power=1.0, arms__contrast=1.0)
    return _fringe_link("power", half, effects, phase)


def _current_link(bench: Bench, _phase: float) -> Link | str:
    gain = responsivity(bench)
    if gain is None:
        return ways_to_give("photodiode.responsivity", "photodiode.quantum_efficiency")
    if bench.get("photodiode.responsivity") is not None:
        return Link("power", "current", gain, _effects(bench, photodiode__responsivity=1.0))
    effects = _effects(bench, photodiode__quantum_efficiency=1.0, laser__wavelength=1.0)
    return Link("power", "current", gain, effects)


def _voltage_link(bench: Bench, _phase: float) -> Link | str:
    if bench.get("photodiode.transimpedance") is None:
        return ways_to_give("photodiode.transimpedance")
    gain = bench.magnitude("photodiode.transimpedance")
    return Link("current", "voltage", gain, _effects(bench, photodiode__transimpedance=1.0))


def _counts_link(bench: Bench, _phase: float) -> Link | str:
    wanted = [key for key in ("adc.bits", "adc.range") if bench.get(key) is None]
    if wanted:
        return " and ".join(ways_to_give(key) for key in wanted)
    step = photodiode.step_v(bench.magnitude("adc.range"), bench.magnitude("adc.bits"))
    effects = _effects(bench, adc__range=-1.0)
    if bench.u("adc.reference"):
        effects["adc.reference"] = -bench.u("adc.reference")
    return Link("voltage", "counts", 1.0 / step, effects)


def _measured_fringe_link(bench: Bench, phase: float) -> Link | None:
    if bench.get("fringe.low") is None or bench.get("fringe.high") is None:
        return None
    low, high = bench.magnitude("fringe.low"), bench.magnitude("fringe.high")
    effects = {
        key: sign * bench.u(key) / (high - low)
        for key, sign in (("fringe.low", -1.0), ("fringe.high", 1.0))
        if bench.u(key)
    }
    return _fringe_link("voltage", 0.5 * (high - low), effects, phase)


def _fringe_link(end: str, half_height: float, effects: dict[str, float], phase: float) -> Link:
    sine = math.sin(phase)
    if abs(sine) < EXTREME_SINE:
        sine = 0.0  # an extreme, but for the rounding of π
    gain = -half_height * sine if sine else 0.0  # not −0
    return Link("phase", end, gain, effects, "fringe", half_height)
