"""The noise beside a line: what the arms do of themselves, and light and electronics."""

from __future__ import annotations

import math
from dataclasses import dataclass
from typing import TYPE_CHECKING

from metro.bench_entry import MotionPoint
from metro.sensitivity import Sensitivity, displacement_noise

if TYPE_CHECKING:
    from collections.abc import Sequence

    from metro.chain import Chain

__all__ = ["ASSUMED_MOTION", "LineNoise", "line_noise", "motion_density"]

ASSUMED_MOTION = (MotionPoint(1.0, 1.2e-9), MotionPoint(1000.0, 1.2e-12))
"""Where the bench says nothing: 40 pm/√Hz at 30 Hz, falling as 1/f, as on an ordinary optical table
(our assumption, not a measurement; a plan that rests on it says so)."""


def motion_density(points: Sequence[MotionPoint], frequency_hz: float) -> float:
    """Return the density of the arms' own motion at a frequency.

    Parameters
    ----------
    points : sequence of MotionPoint
        Frequencies ascending; at least one.
    frequency_hz : float
        Frequency [Hz].

    Returns
    -------
    float
        Amplitude density [m/√Hz]: a power law between two neighbouring points, and the nearest
        one's continued outside.
    """
    known = [point for point in points if point.density_m > 0.0]
    if len(known) < len(points) or len(points) == 1:
        nearest = min(points, key=lambda p: abs(math.log(p.frequency_hz / frequency_hz)))
        return nearest.density_m
    upper = next((n for n, p in enumerate(points) if p.frequency_hz >= frequency_hz), len(points))
    upper = min(max(upper, 1), len(points) - 1)
    low, high = points[upper - 1], points[upper]
    power = math.log(high.density_m / low.density_m) / math.log(
        high.frequency_hz / low.frequency_hz
    )
    density: float = low.density_m * (frequency_hz / low.frequency_hz) ** power
    return density


@dataclass(frozen=True, slots=True)
class LineNoise:
    """What a line has to be seen in.

    Parameters
    ----------
    motion : float
        Amplitude density of the arms' own motion [m/√Hz]; assumed where the bench does not say.
    readout : Sensitivity
        Light and electronics as displacement.
    drive : float
        The converter's noise in the reading of the drive, as the displacement that the drive makes
        [m/√Hz]; 0 where it is unknown or the drive is not read.
    """

    motion: float
    readout: Sensitivity
    drive: float = 0.0

    @property
    def total(self) -> float:
        """What the photodiode shows [m/√Hz]; 0 where nothing is known to be there."""
        return math.hypot(self.motion, self.readout.total or 0.0)


def line_noise(chain: Chain, frequency_hz: float, read_m_per_v: float = 0.0) -> LineNoise:
    """Return the noise that a bench should have beside a line.

    Parameters
    ----------
    chain : Chain
        The signal chain at its working point.
    frequency_hz : float
        Frequency of the line [Hz].
    read_m_per_v : float
        Displacement per volt of the drive as the converter reads it [m/V]; 0 where it does not.

    Returns
    -------
    LineNoise
        Amplitude densities of differential displacement.
    """
    readout = displacement_noise(chain, frequency_hz)
    converter = readout.densities["adc"]
    drive = 0.0
    if converter and read_m_per_v:
        volts_per_metre = abs(float(chain.convert(1.0, "displacement", "voltage")))
        # both channels pass like filters; the photodiode's amplifier is no part of the drive's
        volts = (
            converter
            * volts_per_metre
            * abs(chain.response(frequency_hz, "displacement", "voltage"))
        )
        drive = volts * read_m_per_v
    points = chain.bench.motion or ASSUMED_MOTION
    return LineNoise(motion_density(points, frequency_hz), readout, drive)
