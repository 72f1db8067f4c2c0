"""How the simulated bench stands during one recording: which beams pass, what the drive does."""

from dataclasses import dataclass, field
from math import pi

import numpy as np
from numpy.typing import NDArray

__all__ = ["Drift", "Setup", "Tone", "Triangle"]

FloatArray = NDArray[np.float64]

MID_FRINGE_RAD = {"rising": -pi / 2, "falling": pi / 2}


@dataclass(frozen=True)
class Tone:
    """One sine of the drive: A·cos(2πft + φ) at the actuator's terminals."""

    frequency_hz: float
    amplitude_v: float
    phase_rad: float = 0.0


@dataclass(frozen=True)
class Triangle:
    """A slow symmetric triangle of the drive, for scans over whole fringes in both directions."""

    amplitude_v: float
    period_s: float

    def volts(self, time_s: FloatArray) -> FloatArray:
        """Return the triangle [V] at each time, shape (n,); it starts at zero and rises."""
        turns = (time_s / self.period_s + 0.75) % 1.0
        return self.amplitude_v * (4.0 * np.abs(turns - 0.5) - 1.0)


@dataclass(frozen=True)
class Drift:
    """A slow course of the arms by themselves, on a bench that nobody holds at mid-fringe."""

    speed_m_per_s: float
    sway_m: float = 0.0
    sway_period_s: float = 10.0

    def metres(self, time_s: FloatArray) -> FloatArray:
        """Return the differential displacement [m] at each time, shape (n,); zero at t = 0."""
        sway_m = self.sway_m * np.sin(2 * pi * time_s / self.sway_period_s)
        return np.asarray(self.speed_m_per_s * time_s + sway_m)


@dataclass(frozen=True)
class Setup:
    """One state of the bench.

    ``beam`` is ``"both"``, ``"x"`` or ``"y"`` (one arm alone) or ``"blocked"``; ``slope`` is where
    the operator holds the working point: ``"rising"``, ``"falling"`` or None (wherever it is);
    ``lean_rad`` how far from mid-fringe that is meant to be, towards the fringe's top; ``drift`` a slow
    course of the arms where the bench runs freely.
    """

    duration_s: float
    beam: str = "both"
    slope: str | None = None
    tones: tuple[Tone, ...] = field(default=())
    scan: Triangle | None = None
    lean_rad: float = 0.0
    drift: Drift | None = None

    def working_phase_rad(self, rng: np.random.Generator) -> float:
        """Return where the operator leaves the fringe [rad]: near mid-fringe, or anywhere."""
        if self.slope is None:
            return float(rng.uniform(-pi, pi))
        middle = MID_FRINGE_RAD[self.slope] + float(rng.normal(0.0, OPERATOR_SPREAD_RAD))
        return middle * (1.0 - self.lean_rad / abs(middle))


OPERATOR_SPREAD_RAD = 0.08  # how well a person sets mid-fringe with a voltmeter
