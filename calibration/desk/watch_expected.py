"""What a live page should show of a bench: its fringe, its dark and the noise it should have."""

from collections.abc import Sequence
from dataclasses import dataclass
from math import hypot, pi
from typing import TYPE_CHECKING

import numpy as np
from numpy.typing import NDArray

from calibration.desk.watch_fringe import Fringe
from metro.errors import MetroError

if TYPE_CHECKING:
    from calibration.record import Calibration
    from metro.bench import Bench
    from metro.chain import Chain

__all__ = ["ExpectedNoise", "expected_fringe", "expected_noise", "known_dark"]

FloatArray = NDArray[np.float64]

_LOWEST_HZ = 0.1
_POINTS = 97  # over all decades; between them a power law


@dataclass(frozen=True, eq=False, slots=True)
class ExpectedNoise:
    """Noise of a bench as the converter sees it.

    Parameters
    ----------
    frequency_hz, density_v : ndarray, shape (n,)
        Frequencies ascending [Hz] and amplitude density [V/√Hz].
    sources : tuple of str
        What is counted in it.
    """

    frequency_hz: FloatArray
    density_v: FloatArray
    sources: tuple[str, ...]

    def at(self, frequency_hz: FloatArray) -> FloatArray:
        """Return the density [V/√Hz] at some frequencies, shape (n,), NaN outside the known range."""
        logs = np.interp(
            np.log(frequency_hz),
            np.log(self.frequency_hz),
            np.log(self.density_v),
            left=np.nan,
            right=np.nan,
        )
        return np.asarray(np.exp(logs))


def expected_noise(bench: "Bench", rate_hz: float) -> ExpectedNoise | None:
    """Return the noise that the bench file leads one to expect at mid-fringe.

    Parameters
    ----------
    bench : Bench
        Its light, electronics and converter; the arms' own motion where the file states it.
    rate_hz : float
        Samples per second.

    Returns
    -------
    ExpectedNoise or None
        None where the bench says too little for any source.
    """
    chain = bench.chain()
    frequencies = np.geomspace(_LOWEST_HZ, 0.499 * rate_hz, _POINTS)
    try:
        densities = [_density_v(chain, float(f)) for f in frequencies]
    except MetroError:
        return None
    if not all(densities):
        return None
    return ExpectedNoise(frequencies, np.array(densities), _sources(chain))


def _density_v(chain: "Chain", frequency_hz: float) -> float | None:
    from metro.motion import motion_density
    from metro.noise_sources import UnknownSourceError, converter_per_metre
    from metro.sensitivity import displacement_noise

    total = displacement_noise(chain, frequency_hz).total
    try:
        per_metre = converter_per_metre(chain, frequency_hz)
    except UnknownSourceError:
        return None
    points = chain.bench.motion
    moved = motion_density(points, frequency_hz) if points else 0.0
    return None if total is None else hypot(total, moved) * per_metre


def _sources(chain: "Chain") -> tuple[str, ...]:
    from metro.sensitivity import displacement_noise

    known = [name for name, d in displacement_noise(chain, 1.0).densities.items() if d]
    motion = ["motion of the arms"] if chain.bench.motion else []
    return tuple(name.replace("_", " ") for name in [*known, *motion])


def known_dark(bench: "Bench", calibration: "Calibration | None") -> float | None:
    """Return the voltage without light [V], as calibrated or stated; None where neither says."""
    if calibration is not None and calibration.dark is not None:
        return float(calibration.dark.magnitude)
    dark = bench.get("photodiode.dark")
    return None if dark is None else float(dark.magnitude)


def expected_fringe(bench: "Bench", calibration: "Calibration | None") -> Fringe | None:
    """Return the fringe as calibrated, as the bench file states it, or as its light would make it.

    Parameters
    ----------
    bench : Bench
        Extremes, or power, contrast, responsivity and transimpedance.
    calibration : Calibration or None
        Goes before the bench.

    Returns
    -------
    Fringe or None
        None where nothing says.
    """
    dark_v = known_dark(bench, calibration)
    if calibration is not None:
        extremes = calibration.extremes
        return Fringe.of(extremes.low_v, extremes.high_v, "calibration", dark_v)
    is_stated = bench.get("fringe.low") is not None and bench.get("fringe.high") is not None
    ends = _voltages(bench, (pi, 0.0))
    if ends is None or not ends[1] > ends[0]:
        return None
    return Fringe.of(ends[0], ends[1], "bench" if is_stated else "bench, by its light", dark_v)


def _voltages(bench: "Bench", phases_rad: Sequence[float]) -> list[float] | None:
    from metro.chain import Chain

    try:
        rests = [Chain(bench, phase).working_point().voltage_v for phase in phases_rad]
    except MetroError:
        return None
    known = [volts for volts in rests if volts is not None]
    return known if len(known) == len(rests) else None
