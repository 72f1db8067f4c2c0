"""The sources of noise, each as differential displacement."""

from __future__ import annotations

import math
from typing import TYPE_CHECKING

from metro.kernel import noise as kernel
from metro.kernel.light import optical_frequency_hz
from metro.kernel.photodiode import step_v
from metro.stages import ways_to_give

if TYPE_CHECKING:
    from collections.abc import Callable

    from metro.chain import Chain

__all__ = ["SOURCES", "UnknownSourceError", "converter_per_metre"]


ROOM_K = 293.15


class UnknownSourceError(Exception):
    """What a source needs and the bench does not give; its text says what."""


def _given(chain: Chain, *keys: str) -> list[float]:
    wanted = [key for key in keys if chain.bench.get(key) is None]
    if wanted:
        raise UnknownSourceError(" and ".join(ways_to_give(key) for key in wanted))
    return [chain.bench.magnitude(key) for key in keys]


def _per_metre(chain: Chain, stage: str, frequency_hz: float) -> float:
    """Return the size of the change at a stage per displacement, at a frequency."""
    if chain.maybe_way("displacement", stage) is None:
        raise UnknownSourceError(chain.what_is_missing("displacement", stage))
    gain = abs(float(chain.convert(1.0, "displacement", stage)))
    gain *= abs(chain.response(frequency_hz, "displacement", stage))
    if gain == 0.0:
        raise UnknownSourceError(chain.what_is_missing("displacement", stage))
    return gain


def _rest_current(chain: Chain) -> float:
    current = chain.working_point().current_a
    if current is None:
        raise UnknownSourceError(chain.what_is_missing("phase", "current"))
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
    per_metre = converter_per_metre(chain, frequency_hz)
    (rate_hz,) = _given(chain, "adc.rate")
    density = kernel.quantisation_density(_adc_noise_v(chain), rate_hz)
    return density / per_metre


def converter_per_metre(chain: Chain, frequency_hz: float) -> float:
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
        raise UnknownSourceError(chain.what_is_missing("phase", "voltage"))
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
        raise UnknownSourceError(ways_to_give("air.common_noise", "air.differential_noise"))
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
