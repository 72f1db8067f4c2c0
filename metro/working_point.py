"""Where the interferometer rests on its fringe."""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING

from metro.bench_optics import contrast, responsivity
from metro.kernel.contrast import power_w
from metro.kernel.fringe import voltage as voltage_at

if TYPE_CHECKING:
    from metro.bench import Bench
    from metro.chain import Chain

__all__ = ["WorkingPoint", "rest"]


@dataclass(frozen=True, slots=True)
class WorkingPoint:
    """Where the interferometer rests.

    Parameters
    ----------
    phase_rad : float
        Phase, 0 at this detector's maximum [rad].
    power_w, current_a, voltage_v : float or None
        Mean power, photocurrent and voltage; None where unknown.
    slope_v_rad, slope_v_m : float or None
        dV/dφ [V/rad] and dV/dx [V/m]; None where unknown.
    """

    phase_rad: float
    power_w: float | None
    current_a: float | None
    voltage_v: float | None
    slope_v_rad: float | None
    slope_v_m: float | None


def rest(chain: Chain) -> WorkingPoint:
    """Return the working point of a chain.

    Parameters
    ----------
    chain : Chain
        Its bench and its working phase.

    Returns
    -------
    WorkingPoint
        Voltage from measured extremes where the bench has them; power from them too, where
        responsivity and transimpedance are known.
    """
    bench, phase = chain.bench, chain.working_phase_rad
    amps_per_watt, ohms = responsivity(bench), _maybe(bench, "photodiode.transimpedance")
    dark = bench.magnitude("photodiode.dark", 0.0)
    voltage = _measured_voltage(bench, phase)
    power: float | None
    if voltage is not None and amps_per_watt and ohms:
        power = (voltage - dark) / (ohms * amps_per_watt)
    else:
        power = _power(bench, phase)
    current = power * amps_per_watt if power is not None and amps_per_watt else None
    if voltage is None and current is not None and ohms:
        voltage = current * ohms + dark
    slopes = (_maybe_gain(chain, "phase"), _maybe_gain(chain, "displacement"))
    return WorkingPoint(phase, power, current, voltage, *slopes)


def _power(bench: Bench, phase_rad: float) -> float | None:
    if bench.get("laser.power") is None:
        return None
    return power_w(phase_rad, bench.magnitude("laser.power"), contrast(bench))


def _measured_voltage(bench: Bench, phase_rad: float) -> float | None:
    low, high = _maybe(bench, "fringe.low"), _maybe(bench, "fringe.high")
    return None if low is None or high is None else voltage_at(phase_rad, low, high)


def _maybe(bench: Bench, key: str) -> float | None:
    value = bench.get(key)
    return None if value is None else float(value.magnitude)


def _maybe_gain(chain: Chain, start: str) -> float | None:
    known = chain.maybe_way(start, "voltage") is not None
    return float(chain.convert(1.0, start, "voltage")) if known else None
