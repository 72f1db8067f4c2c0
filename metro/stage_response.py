"""Frequency response of each stage of the signal chain, relative to frequency zero."""

from __future__ import annotations

from typing import TYPE_CHECKING

from metro.bench_optics import cavity_mirrors
from metro.kernel.arms import arm_response
from metro.kernel.cavity import cavity_response, folded_response

if TYPE_CHECKING:
    from metro.bench import Bench
    from metro.chain import Chain

__all__ = ["stage_response"]


def stage_response(chain: Chain, frequency_hz: float, stage: str) -> complex:
    """Return the response of the step that leads to a stage.

    Parameters
    ----------
    chain : Chain
        The signal chain.
    frequency_hz : float
        Frequency [Hz].
    stage : str
        Stage that the step leads to.

    Returns
    -------
    complex
        Arm at normal incidence for ``displacement``, storage in folded or Fabry–Perot arms for
        ``phase``, amplifier for ``voltage``, filter and aperture for ``counts``; else 1.
    """
    if stage == "voltage":
        return chain.readout.voltage_response(frequency_hz)
    if stage == "counts":
        return chain.readout.counts_response(frequency_hz)
    if stage in {"displacement", "phase"} and chain.bench.get("arms.length") is not None:
        length_m = chain.bench.magnitude("arms.length")
        if stage == "displacement":
            return arm_response(frequency_hz, length_m)
        return _storage(chain.bench, frequency_hz, length_m)
    return 1.0 + 0.0j


def _storage(bench: Bench, frequency_hz: float, length_m: float) -> complex:
    """Return what the later trips of folded or Fabry–Perot arms leave."""
    if bench.get("arms.input_reflectance") is not None:
        return cavity_response(frequency_hz, length_m, *cavity_mirrors(bench))
    trips = int(bench.magnitude("arms.round_trips", 1.0))
    return folded_response(frequency_hz, length_m, trips)
