"""Expected noise: what a bench should show in the spectrum of a recording, source by source."""

from dataclasses import dataclass
from typing import TYPE_CHECKING

import numpy as np
from numpy.typing import NDArray

from metro.kernel.phase import phase_per_metre
from metro.motion import motion_density
from metro.noise_sources import UnknownSourceError, converter_per_metre
from metro.sensitivity import displacement_noise

if TYPE_CHECKING:
    from collections.abc import Sequence

    from calibration.record import Calibration
    from firmware_bridge.channel import Channel
    from metro.bench import Bench
    from metro.bench_entry import MotionPoint
    from metro.chain import Chain

__all__ = ["ExpectedNoise", "bench_as_measured", "expected_noise"]

FloatArray = NDArray[np.float64]

_A_DECADE = 24  # frequencies at which the chain is asked


@dataclass(frozen=True, eq=False, slots=True)
class ExpectedNoise:
    """The noise a bench should have.

    Parameters
    ----------
    density : ndarray, shape (n_bins,)
        All known sources together, unit/√Hz.
    sources : dict of str to ndarray
        Each by itself.
    missing : tuple of str
        Sources that the bench does not give enough for.
    remarks : tuple of str
        Where one is doubtful.
    """

    density: FloatArray
    sources: dict[str, FloatArray]
    missing: tuple[str, ...]
    remarks: tuple[str, ...]


def bench_as_measured(
    bench: "Bench", rate_hz: float, channel: "Channel", calibration: "Calibration | None"
) -> "Bench":
    """Return a bench with assumed values replaced by those of the calibration and the recording.

    Parameters
    ----------
    bench : Bench
        As its file has it; may be empty.
    rate_hz : float
        Sampling rate of the recording [Hz].
    channel : Channel
        The photodiode's, whose scale is a count in volts.
    calibration : Calibration or None
        Extremes, wavelength, round trips and arm length.

    Returns
    -------
    Bench
        With the recording's rate always; rounding to counts is the converter's noise where nothing
        else about it is known.
    """
    from metro.kernel.noise import quantisation_v
    from metro.measured import Measured

    values = {"adc.rate": Measured.of(rate_hz, "Hz")}
    is_counted = channel.unit == "V" and abs(channel.scale) not in (0.0, 1.0)
    told = ("adc.noise", "adc.effective_bits", "adc.bits")
    if is_counted and all(bench.get(key) is None for key in told):
        values["adc.noise"] = Measured.of(quantisation_v(abs(channel.scale)), "V")
    if calibration is not None:
        values["fringe.low"] = Measured.of(calibration.extremes.low_v, "V")
        values["fringe.high"] = Measured.of(calibration.extremes.high_v, "V")
        for name, key in _CHAIN_KEYS.items():
            entry = calibration.chain.get(name)
            if entry is not None:
                values[key] = entry
    return bench.replace(values, "the recording and its calibration")


_CHAIN_KEYS = {
    "wavelength": "laser.wavelength",
    "round_trips": "arms.round_trips",
    "arm_length": "arms.length",
    "index": "air.index",
}


def expected_noise(
    bench: "Bench", quantity: str, frequency_hz: FloatArray, *, undone: bool = False
) -> ExpectedNoise | None:
    """Return the noise that a bench should show.

    Parameters
    ----------
    bench : Bench
        As measured.
    quantity : str
        ``"displacement"`` [m], ``"strain"`` [1], ``"phase"`` [rad] or ``"voltage"`` [V].
    frequency_hz : ndarray, shape (n_bins,)
        Bins of the spectrum [Hz], the first may be 0.
    undone : bool
        Whether what amplifier, filter and aperture take away was put back into the recording.

    Returns
    -------
    ExpectedNoise or None
        None where no source is known.
    """
    chain = bench.chain()
    lowest = float(frequency_hz[frequency_hz > 0][0])
    asked = np.geomspace(lowest, frequency_hz[-1], _points(lowest, float(frequency_hz[-1])))
    noises = [displacement_noise(chain, f) for f in asked.tolist()]
    scale = _scale(chain, quantity, asked, undone)
    if scale is None:
        return None
    found = {
        name: np.array([n.densities[name] or 0.0 for n in noises])
        for name, value in noises[0].densities.items()
        if value
    }
    remarks = noises[0].remarks
    if bench.motion:
        remarks += (_motion_remark(bench.motion),)
        found["motion"] = np.array([motion_density(bench.motion, f) for f in asked.tolist()])
    if not found:
        return None
    place = np.log(np.maximum(frequency_hz, lowest))

    def spread(density_m: FloatArray) -> FloatArray:
        logs = np.log(np.maximum(density_m * scale, np.finfo(float).tiny))
        return np.asarray(np.exp(np.interp(place, np.log(asked), logs)))

    return ExpectedNoise(
        spread(np.sqrt(sum(density**2 for density in found.values()))),
        {name: spread(density) for name, density in found.items()},
        tuple(noises[0].missing),
        remarks,
    )


def _motion_remark(points: "Sequence[MotionPoint]") -> str:
    return (
        f"the arms' own motion is stated from {points[0].frequency_hz:g} Hz to "
        f"{points[-1].frequency_hz:g} Hz and continued outside"
    )


def _points(lowest: float, highest: float) -> int:
    return max(2, int(_A_DECADE * np.log10(highest / lowest)) + 1)


def _scale(
    chain: "Chain", quantity: str, frequency_hz: FloatArray, undone: bool
) -> FloatArray | None:
    """Return what a metre of differential displacement shows as, amplifier, filter and aperture included.

    A recording that was converted sample by sample has lost at high frequency what they take away, so
    the noise it should show has lost it too.
    """
    try:
        volts = np.array([converter_per_metre(chain, f) for f in (0.0, *frequency_hz.tolist())])
    except UnknownSourceError:
        return None
    if quantity == "voltage":
        return np.asarray(volts[1:])
    bench, seen = chain.bench, np.ones(len(frequency_hz)) if undone else volts[1:] / volts[0]
    if quantity == "strain":
        return np.asarray(seen / bench.magnitude("arms.length"))
    if quantity == "phase":
        wavelength_m, index = bench.magnitude("laser.wavelength"), bench.index().magnitude
        trips = bench.magnitude("arms.round_trips", 1.0)
        return np.asarray(seen * phase_per_metre(wavelength_m, float(index), trips))
    return np.asarray(seen)
