"""Noise of a bench as differential displacement, each source by its name."""

from __future__ import annotations

import math
from dataclasses import dataclass
from typing import TYPE_CHECKING

from metro.kernel import noise as kernel
from metro.kernel.arms import arm_response
from metro.kernel.light import optical_frequency_hz
from metro.kernel.photodiode import step_v
from metro.stages import ways_to_give

if TYPE_CHECKING:
    from collections.abc import Callable

    from metro.chain import Chain

__all__ = ["SOURCES", "Sensitivity", "displacement_noise", "strain_scale"]

ROOM_K = 293.15


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


class _Unknown(Exception):  # noqa: N818  # never leaves this module
    """What a source needs and the bench does not give; its text says what."""


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
        except _Unknown as unknown:
            densities[name] = None
            missing[name] = str(unknown)
    remark = _quantisation_remark(chain, frequency_hz, densities)
    return Sensitivity(frequency_hz, densities, missing, (remark,) if remark else ())


def _given(chain: Chain, *keys: str) -> list[float]:
    wanted = [key for key in keys if chain.bench.get(key) is None]
    if wanted:
        raise _Unknown(" and ".join(ways_to_give(key) for key in wanted))
    return [chain.bench.magnitude(key) for key in keys]


def _per_metre(chain: Chain, stage: str, frequency_hz: float) -> float:
    """Return the size of the change at a stage per displacement, at a frequency."""
    if chain.maybe_way("displacement", stage) is None:
        raise _Unknown(chain.what_is_missing("displacement", stage))
    gain = abs(float(chain.convert(1.0, "displacement", stage)))
    gain *= abs(chain.response(frequency_hz, "displacement", stage))
    if gain == 0.0:
        raise _Unknown(chain.what_is_missing("displacement", stage))
    return gain


def _rest_current(chain: Chain) -> float:
    current = chain.working_point().current_a
    if current is None:
        raise _Unknown(chain.what_is_missing("phase", "current"))
    return max(current, 0.0)


def _shot(chain: Chain, frequency_hz: float) -> float:
    per_metre = _per_metre(chain, "current", frequency_hz)
    return kernel.shot_current(_rest_current(chain)) / per_metre


def _johnson(chain: Chain, frequency_hz: float) -> float:
    (ohms,) = _given(chain, "photodiode.transimpedance")
    temperature_k = chain.bench.magnitude("air.temperature", ROOM_K)
    return kernel.johnson_current(ohms, temperature_k) / _per_metre(chain, "current", frequency_hz)


def _amplifier_voltage(chain: Chain, frequency_hz: float) -> float:
    """Return the amplifier's voltage noise, driving current through its input network."""
    density, ohms = _given(chain, "photodiode.amplifier_voltage_noise", "photodiode.transimpedance")
    susceptance = (
        2.0 * math.pi * frequency_hz * chain.bench.magnitude("photodiode.capacitance", 0.0)
    )
    return (
        density * math.hypot(1.0 / ohms, susceptance) / _per_metre(chain, "current", frequency_hz)
    )


def _amplifier_current(chain: Chain, frequency_hz: float) -> float:
    (density,) = _given(chain, "photodiode.amplifier_current_noise")
    return density / _per_metre(chain, "current", frequency_hz)


def _adc(chain: Chain, frequency_hz: float) -> float:
    """Return the converter's noise, referred back through what amplifier and filter take away."""
    per_metre = _converter_per_metre(chain, frequency_hz)
    (rate_hz,) = _given(chain, "adc.rate")
    density = kernel.quantisation_density(_adc_noise_v(chain), rate_hz)
    return density / per_metre


def _converter_per_metre(chain: Chain, frequency_hz: float) -> float:
    """Return the voltage that the converter sees per displacement, filter and aperture included."""
    return _per_metre(chain, "voltage", frequency_hz) * abs(
        chain.readout.counts_response(frequency_hz)
    )


def _adc_noise_v(chain: Chain) -> float:
    bench = chain.bench
    if bench.get("adc.noise") is not None:
        return bench.magnitude("adc.noise")
    if bench.get("adc.effective_bits") is not None:
        (full,) = _given(chain, "adc.range")
        return kernel.effective_noise_v(full, bench.magnitude("adc.effective_bits"))
    full, bits = _given(chain, "adc.range", "adc.bits")
    return kernel.quantisation_v(step_v(full, bits))


def _relative_intensity(chain: Chain, frequency_hz: float) -> float:
    (density,) = _given(chain, "laser.relative_intensity_noise")
    here = chain.working_point()
    if here.power_w is not None and chain.maybe_way("displacement", "power") is not None:
        return density * here.power_w / _per_metre(chain, "power", frequency_hz)
    if here.voltage_v is None:
        raise _Unknown(chain.what_is_missing("phase", "voltage"))
    dark = chain.bench.magnitude("photodiode.dark", 0.0)
    return density * abs(here.voltage_v - dark) / _per_metre(chain, "voltage", frequency_hz)


def _laser_frequency(chain: Chain, _f: float) -> float:
    density, mismatch_m, wavelength_m = _given(
        chain, "laser.frequency_noise", "arms.mismatch", "laser.wavelength"
    )
    return abs(mismatch_m) * density / optical_frequency_hz(wavelength_m)


def _air(chain: Chain, _f: float) -> float:
    """Return the air's index noise: common to both arms times mismatch, between them times arm."""
    if chain.bench.in_vacuum:
        return 0.0
    common, between = 0.0, 0.0
    if (
        chain.bench.get("air.differential_noise") is None
        and chain.bench.get("air.common_noise") is None
    ):
        raise _Unknown(ways_to_give("air.common_noise", "air.differential_noise"))
    if chain.bench.get("air.common_noise") is not None:
        density, mismatch_m = _given(chain, "air.common_noise", "arms.mismatch")
        common = density * abs(mismatch_m)
    if chain.bench.get("air.differential_noise") is not None:
        density, length_m = _given(chain, "air.differential_noise", "arms.length")
        between = density * length_m
    return math.hypot(common, between)  # over n, which is 1 to a part in 3000


def _tilt(chain: Chain, _f: float) -> float:
    """Return the mirrors' tilt noise, seen through a beam off the pivot."""
    tilt, offset_m = _given(chain, "arms.tilt_noise", "arms.beam_offset")
    return tilt * abs(offset_m)


SOURCES: dict[str, Callable[[Chain, float], float]] = {
    "shot": _shot,
    "johnson": _johnson,
    "amplifier_voltage": _amplifier_voltage,
    "amplifier_current": _amplifier_current,
    "adc": _adc,
    "relative_intensity": _relative_intensity,
    "laser_frequency": _laser_frequency,
    "air": _air,
    "tilt": _tilt,
}
"""Each source by its name, in the order the light and the signal pass them."""


def _quantisation_remark(
    chain: Chain, frequency_hz: float, densities: dict[str, float | None]
) -> str | None:
    """Return why q/√12 may be wrong: only noise of half a count or more spreads the steps."""
    bench = chain.bench
    if densities["adc"] is None or bench.get("adc.noise") or bench.get("adc.effective_bits"):
        return None
    others = kernel.root_sum([d for name, d in densities.items() if d and name != "adc"])
    per_metre = _converter_per_metre(chain, frequency_hz)
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
