"""The stages of the signal chain, and the links between them that a bench determines."""

from __future__ import annotations

import math
from dataclasses import dataclass
from typing import TYPE_CHECKING, Any

from metro.bench_keys import OPTIONS
from metro.errors import MetroError
from metro.kernel import beam, cavity, fringe, photodiode

if TYPE_CHECKING:
    from collections.abc import Callable

    from metro.bench import Bench
    from metro.units import Quantity

__all__ = [
    "STAGES",
    "UNITS",
    "Link",
    "Links",
    "bench_links",
    "responsivity",
    "stage_si",
    "ways_to_give",
]

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


@dataclass(frozen=True, slots=True)
class Link:
    """What turns a change at one stage into a change at another, about the working point.

    Parameters
    ----------
    start, end : str
        Names of the stages.
    gain : float
        Change at ``end`` per change at ``start``, in the units of :data:`UNITS`; 0 at an
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
    gain = fringe.phase_per_metre(wavelength, n, phase_trips(bench))
    effects = _effects(bench, laser__wavelength=-1.0)
    if index.u_magnitude:
        effects["air.index"] = float(index.u_magnitude) / n
    return Link("displacement", "phase", gain, effects)


def phase_trips(bench: Bench) -> float:
    """Return how many round trips the phase of a slow displacement is worth.

    Parameters
    ----------
    bench : Bench
        What is known of the arms.

    Returns
    -------
    float
        Round trips of simple or folded arms, the phase gain of Fabry–Perot arms.

    Raises
    ------
    MetroError
        If the arms are said to be folded and Fabry–Perot at once, or the mirrors are in the wrong
        order.
    """
    trips = bench.magnitude("arms.round_trips", 1.0)
    if bench.get("arms.input_reflectance") is None:
        return trips
    if trips != 1.0:
        raise MetroError(
            f"arms.round_trips must be 1 where arms.input_reflectance makes a cavity, got {trips:g}"
        )
    try:
        return cavity.phase_gain(*cavity_mirrors(bench))
    except ValueError as error:
        raise MetroError(f"[arms] {error}") from None


def cavity_mirrors(bench: Bench) -> tuple[float, float]:
    """Return the power reflectances of Fabry–Perot arms.

    Parameters
    ----------
    bench : Bench
        With ``arms.input_reflectance``.

    Returns
    -------
    tuple of float
        Input and end mirror; a perfect end mirror where none is given.
    """
    return bench.magnitude("arms.input_reflectance"), bench.magnitude("arms.end_reflectance", 1.0)


def contrast(bench: Bench) -> float:
    """Return the contrast of a bench: given, or what the laser's coherence leaves.

    Parameters
    ----------
    bench : Bench
        What is known.

    Returns
    -------
    float
        Contrast; 1 where neither contrast nor linewidth and mismatch are given.
    """
    if bench.get("arms.contrast") is not None:
        return bench.magnitude("arms.contrast")
    return coherence(bench) or 1.0


def coherence(bench: Bench) -> float | None:
    """Return the contrast that the laser's linewidth leaves at the arms' mismatch.

    Parameters
    ----------
    bench : Bench
        What is known.

    Returns
    -------
    float or None
        0 … 1; None where linewidth or mismatch is not given.
    """
    if bench.get("laser.linewidth") is None or bench.get("arms.mismatch") is None:
        return None
    path_m = 2.0 * phase_trips(bench) * bench.magnitude("arms.mismatch")
    return beam.coherence(path_m, bench.magnitude("laser.linewidth"))


def _fringes_link(_bench: Bench, _phase: float) -> Link | str:
    return Link("phase", "fringes", 0.5 / math.pi, {})


def _power_link(bench: Bench, phase: float) -> Link | str:
    if bench.get("laser.power") is None:
        return ways_to_give("laser.power")
    half = bench.magnitude("laser.power") * contrast(bench)
    effects = _effects(bench, laser__power=1.0, arms__contrast=1.0)
    return _fringe_link("power", half, effects, phase)


def responsivity(bench: Bench) -> float | None:
    """Return the responsivity of a bench's photodiode, given or from its quantum efficiency.

    Parameters
    ----------
    bench : Bench
        What is known.

    Returns
    -------
    float or None
        Responsivity [A/W].
    """
    given = bench.get("photodiode.responsivity")
    if given is not None:
        return float(given.magnitude)
    if bench.get("photodiode.quantum_efficiency") is None or bench.get("laser.wavelength") is None:
        return None
    return photodiode.responsivity_a_w(
        bench.magnitude("photodiode.quantum_efficiency"), bench.magnitude("laser.wavelength")
    )


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
    if abs(sine) < 1e-9:
        sine = 0.0  # an extreme, but for the rounding of π
    return Link("phase", end, -half_height * sine, effects, "fringe", half_height)
