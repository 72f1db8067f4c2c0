"""Noise of a bench as differential displacement, each source by its name."""

from __future__ import annotations

import math
from dataclasses import dataclass
from typing import TYPE_CHECKING

from metro.kernel import noise as kernel
from metro.kernel.arms import arm_response
from metro.kernel.photodiode import step_v
from metro.noise_sources import SOURCES, UnknownSourceError, converter_per_metre

if TYPE_CHECKING:
    from metro.chain import Chain

__all__ = ["Sensitivity", "displacement_noise", "strain_scale"]


@dataclass(frozen=True, slots=True)
class Sensitivity:
    """Noise of a bench at one frequency, as amplitude density of differential displacement.

    Parameters
    ----------
    frequency_hz : float
        Frequency [Hz].
    densities : dict of str to float or None
        By source [m/√Hz]; None where the bench does not say enough.
    missing : dict of str to str
        By unknown source: what to give.
    remarks : tuple of str
        Where a source is doubtful.
    """

    frequency_hz: float
    densities: dict[str, float | None]
    missing: dict[str, str]
    remarks: tuple[str, ...]

    @property
    def total(self) -> float | None:
        """Known sources added in power [m/√Hz]; None if none is known to be there."""
        known = [d for d in self.densities.values() if d]
        return kernel.root_sum(known) if known else None


def displacement_noise(chain: Chain, frequency_hz: float = 0.0) -> Sensitivity:
    """Return every noise source of a bench as differential displacement.

    Parameters
    ----------
    chain : Chain
        The signal chain at its working point.
    frequency_hz : float, default 0
        Frequency at which amplifier, filter and aperture act [Hz].

    Returns
    -------
    Sensitivity
        Shot, Johnson, amplifier voltage and current, converter, relative intensity, laser
        frequency through the arm mismatch, air, and tilt through the beam offset.
    """
    densities: dict[str, float | None] = {}
    missing: dict[str, str] = {}
    for name, source in SOURCES.items():
        try:
            densities[name] = source(chain, frequency_hz)
        except UnknownSourceError as unknown:
            densities[name] = None
            missing[name] = str(unknown)
    remark = _quantisation_remark(chain, frequency_hz, densities)
    return Sensitivity(frequency_hz, densities, missing, (remark,) if remark else ())


def _quantisation_remark(
    chain: Chain, frequency_hz: float, densities: dict[str, float | None]
) -> str | None:
    """Return why q/√12 may be wrong: only noise of half a count or more spreads the steps."""
    bench = chain.bench
    if densities["adc"] is None or bench.get("adc.noise") or bench.get("adc.effective_bits"):
        return None
    others = kernel.root_sum([d for name, d in densities.items() if d and name != "adc"])
    per_metre = converter_per_metre(chain, frequency_hz)
    step = step_v(bench.magnitude("adc.range"), bench.magnitude("adc.bits"))
    seen_v = others * per_metre * math.sqrt(0.5 * bench.magnitude("adc.rate"))
    if seen_v >= 0.5 * step:
        return None
    return (
        f"adc noise is q/√12, which holds only where the signal moves by about a count: the known noise"
        f" is {seen_v / step:.2g} counts rms; give [adc] noise as measured in the dark"
    )


def strain_scale(chain: Chain, frequency_hz: float) -> float | None:
    """Return the strain that a displacement is worth, the light's travel time included.

    Parameters
    ----------
    chain : Chain
        For the arm length.
    frequency_hz : float
        Frequency [Hz].

    Returns
    -------
    float or None
        Strain per displacement [1/m] at normal incidence; None without an arm length, or where the
        arms are blind.
    """
    if chain.bench.get("arms.length") is None:
        return None
    length_m = chain.bench.magnitude("arms.length")
    size = abs(arm_response(frequency_hz, length_m))
    return 1.0 / (length_m * size) if size else None
