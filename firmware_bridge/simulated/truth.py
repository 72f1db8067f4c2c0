"""The truth of one simulated bench: every quantity of the budget drawn from its distribution.

What the bench file states with an uncertainty is drawn from that statement; what a session has to
find out (actuator, pick-up, tilt, dark level) is drawn from the ranges below. The analysis sees
the bench file's nominal values only.
"""

from dataclasses import dataclass
from math import pi, sqrt
from typing import Any

import numpy as np

from firmware_bridge.simulated.response import pole_gain
from metro.bench import Bench
from metro.drive import amplifier_gain
from metro.measured import Measured

__all__ = ["Truth", "draw_truth"]

_TRUTH_STREAM = 7919  # keeps the draw of the truth apart from the recordings' noise


@dataclass(frozen=True)
class Truth:
    """What the simulated bench really is (SI units; relative quantities dimensionless)."""

    wavelength_m: float
    index: float
    round_trips: float
    swing_v: float  # (high - low)/2 at the photodiode amplifier, before the ADC's errors
    contrast: float
    dark_v: float
    amplifier_hz: float  # transimpedance corner; inf where the bench names none
    antialias_hz: float
    reference: float  # relative error of the ADC's scale
    quadratic: float  # ADC non-linearity as fractions of the range
    cubic: float
    divider: float
    drive_gain: float  # of the amplifier between the drive's reading and the terminals
    channel_delay_s: float
    clock: float  # relative error of the board's clock: its samples come at rate·(1 + clock)
    power_drift_u: float  # relative change of power from one recording to the next
    moved_arm: str  # "x" or "y": the arm whose mirror the actuator moves, and tilts
    gain_m_per_v: float  # differential displacement per volt at zero frequency, signed
    resonance_hz: float
    quality: float
    actuator_delay_s: float
    tilt_per_v: float  # relative change of the moved arm's power per volt of drive
    pickup_v_per_v: complex  # electrical pick-up at 100 Hz, proportional to frequency

    def actuator(self, frequency_hz: float) -> complex:
        """Return the actuator's response [m/V] at one frequency: resonance and delay."""
        ratio = frequency_hz / self.resonance_hz
        shape = 1.0 / complex(1.0 - ratio**2, ratio / self.quality)
        return complex(
            self.gain_m_per_v * shape * np.exp(-2j * pi * frequency_hz * self.actuator_delay_s)
        )

    @property
    def phase_per_metre(self) -> float:
        """Optical phase per differential displacement [rad/m]."""
        return 2 * pi * 2 * self.round_trips * self.index / self.wavelength_m

    @property
    def readout_slope(self) -> float:
        """Volts per metre at mid-fringe, rising slope [V/m]."""
        return self.swing_v * self.phase_per_metre

    @property
    def clock_offset(self) -> float:
        """Where lines appear in the board's own time: at f·(1 + offset)."""
        return 1.0 / (1.0 + self.clock) - 1.0

    @property
    def readout_corners_hz(self) -> tuple[float, ...]:
        """Corners of the photodiode channel's poles [Hz], those at infinity left out."""
        return tuple(c for c in (self.amplifier_hz, self.antialias_hz) if np.isfinite(c))

    @property
    def drive_corners_hz(self) -> tuple[float, ...]:
        """Corners of the drive channel's poles [Hz]."""
        return tuple(c for c in (self.antialias_hz,) if np.isfinite(c))

    def readout_gain(self, frequency_hz: float) -> complex:
        """Return the photodiode channel's response relative to zero frequency."""
        return pole_gain(frequency_hz, self.readout_corners_hz)


def draw_truth(bench: Bench, seed: int) -> Truth:
    """Return the truth of the bench for one seed.

    Parameters
    ----------
    bench : Bench
        Nominal values with their stated uncertainties and distributions.
    seed : int
        Seed; the same seed and bench give the same truth.

    Returns
    -------
    Truth
        Drawn values, SI units.
    """
    rng = np.random.default_rng([seed, _TRUTH_STREAM])
    swing_v, contrast = _draw_fringe(bench, rng)
    wavelength_m = _draw(bench, "laser.wavelength", rng)
    return Truth(
        wavelength_m=wavelength_m,
        index=_draw_index(bench, rng),
        round_trips=_draw(bench, "arms.round_trips", rng, 1.0),
        swing_v=swing_v,
        contrast=contrast,
        dark_v=float(rng.normal(0.0, 5e-3)),
        amplifier_hz=_draw(bench, "photodiode.bandwidth", rng, np.inf),
        antialias_hz=_draw(bench, "adc.antialias", rng, np.inf),
        reference=_draw(bench, "adc.reference", rng, 0.0),
        quadratic=_draw(bench, "adc.quadratic", rng, 0.0),
        cubic=_draw(bench, "adc.cubic", rng, 0.0),
        divider=_draw(bench, "drive.divider", rng, 1.0),
        drive_gain=_draw_drive_gain(bench, rng),
        channel_delay_s=_draw(bench, "adc.channel_delay", rng, 0.0),
        clock=_draw(bench, "adc.clock", rng, 0.0),
        power_drift_u=_stated_u(bench, "fringe.drift"),
        moved_arm=bench.text("actuator.arm") or "x",
        **_draw_actuator(bench, rng),
    )


def _draw_fringe(bench: Bench, rng: np.random.Generator) -> tuple[float, float]:
    """Return (high − low)/2 [V] and contrast: nominal to some per cent, as on any bench."""
    contrast = min(
        0.999, bench.magnitude("arms.contrast") * (1.0 + float(rng.uniform(-0.02, 0.02)))
    )
    mid_v = bench.magnitude("laser.power") * bench.magnitude("photodiode.responsivity")
    mid_v *= bench.magnitude("photodiode.transimpedance") * (1.0 + float(rng.uniform(-0.02, 0.02)))
    return mid_v * contrast, contrast


def _draw_actuator(bench: Bench, rng: np.random.Generator) -> dict[str, Any]:
    """Return the actuator and its nuisances: what a session is there to find out."""
    arm_sign = -1.0 if bench.text("actuator.arm") == "y" else 1.0
    polarity = bench.magnitude("actuator.polarity", 1.0)
    pickup = complex(_draw(bench, "drive.pickup", rng, 0.0), _draw(bench, "drive.pickup", rng, 0.0))
    return {
        "gain_m_per_v": arm_sign * polarity * abs(_draw(bench, "actuator.gain", rng)),
        "resonance_hz": bench.magnitude("actuator.resonance", 1800.0)
        * (1.0 + float(rng.uniform(-0.1, 0.1))),
        "quality": bench.magnitude("actuator.q", 20.0) * (1.0 + float(rng.uniform(-0.2, 0.2))),
        "actuator_delay_s": float(rng.uniform(5e-6, 50e-6)),
        "tilt_per_v": _draw(bench, "actuator.tilt", rng, 0.0),
        "pickup_v_per_v": pickup,
    }


def _draw_drive_gain(bench: Bench, rng: np.random.Generator) -> float:
    """Return the amplifier's gain, where the drive is read before it."""
    if amplifier_gain(bench) == 1.0:
        rng.normal()
        return 1.0
    return _draw(bench, "drive.amplifier_gain", rng)


def _draw_index(bench: Bench, rng: np.random.Generator) -> float:
    """Return the arms' refractive index: inputs drawn, then the equation's own uncertainty."""
    drawn = bench
    for key in ("air.temperature", "air.pressure", "air.humidity", "air.co2"):
        entry = bench.get(key)
        if entry is not None and entry.u_magnitude is not None:
            value = _sample(entry.magnitude, entry.u_magnitude, bench.distribution(key), rng)
            drawn = drawn.replace({key: Measured.of(value, entry.unit)})
    index = drawn.index()
    u = 0.0 if index.u_magnitude is None else float(index.u_magnitude)
    return float(index.magnitude) + float(rng.normal(0.0, 1.0)) * u


def _stated_u(bench: Bench, key: str) -> float:
    return 0.0 if bench.get(key) is None else bench.u(key)


def _draw(bench: Bench, key: str, rng: np.random.Generator, default: float | None = None) -> float:
    """Return one draw of a stated quantity; each takes its draw even where it is not stated."""
    entry = bench.get(key)
    if entry is None and default is not None:
        rng.normal()
        return default
    return _sample(bench.magnitude(key), bench.u(key), bench.distribution(key), rng)


def _sample(value: float, u: float, distribution: str, rng: np.random.Generator) -> float:
    """Return one draw of mean ``value`` and standard deviation ``u``."""
    if distribution == "rectangular":
        return value + u * sqrt(3.0) * float(rng.uniform(-1.0, 1.0))
    return value + u * float(rng.normal())
