"""The least uncertainty that the noise of a simulated bench allows for a line's coefficient.

The Cramér–Rao bound of a line of amplitude A in noise of one-sided density S over the time T is
√(S/T)/A, relative for the magnitude and in radians for the phase (Rife and Boorstyn 1974 for white
noise; the local density where it is coloured).
"""

from collections.abc import Sequence
from math import sqrt

from calibration.rehearsal_script import Step
from firmware_bridge.simulated.bench import SimulatedBench
from firmware_bridge.simulated.motion import spectral_density
from firmware_bridge.simulated.response import pole_gain
from firmware_bridge.simulated.stream import AMPLIFIER_TEMPERATURE_K, ARM_MOTION, POWER_NOISE
from metro.kernel.noise import johnson_voltage, shot_current

__all__ = ["line_bound"]


def line_bound(bench: SimulatedBench, steps: Sequence[Step], frequency_hz: float) -> float:
    """Return the bound of a line over all recordings that drive it at mid-fringe.

    Parameters
    ----------
    bench : SimulatedBench
        With its truth.
    steps : sequence of Step
        The session.
    frequency_hz : float
        Of the line [Hz].

    Returns
    -------
    float
        Relative, for the magnitude; the same number in radians for the phase.
    """
    information = 0.0
    for step in steps:
        for tone in step.setup.tones:
            if step.role.startswith("lines") and tone.frequency_hz == frequency_hz:
                moved_m = abs(bench.truth.actuator(frequency_hz)) * tone.amplitude_v
                density = _motion_density(bench, frequency_hz) / moved_m**2
                density += _drive_density(bench, frequency_hz, tone.amplitude_v)
                information += step.setup.duration_s / density
    return 1.0 / sqrt(information)


def _motion_density(bench: SimulatedBench, frequency_hz: float) -> float:
    """Return the density of all that looks like motion at mid-fringe [m²/Hz]."""
    truth, mid_v = bench.truth, bench.truth.swing_v / bench.truth.contrast
    impedance = bench.transimpedance_v_per_a
    light = mid_v * (impedance * shot_current(1.0 / impedance)) ** 2
    light += johnson_voltage(impedance, AMPLIFIER_TEMPERATURE_K) ** 2
    light += mid_v**2 * spectral_density(POWER_NOISE, bench.rate_hz, frequency_hz)
    gain = abs(truth.readout_gain(frequency_hz))
    volts = light + _converter_density(bench) / gain**2
    arms = spectral_density(ARM_MOTION, bench.rate_hz, frequency_hz)
    return arms + volts / truth.readout_slope**2


def _drive_density(bench: SimulatedBench, frequency_hz: float, drive_v: float) -> float:
    """Return the density of the drive's reading over its amplitude, squared [1/Hz]."""
    truth = bench.truth
    read_v = drive_v / truth.divider / truth.drive_gain
    read_v *= abs(pole_gain(frequency_hz, truth.drive_corners_hz))
    return _converter_density(bench) / read_v**2


def _converter_density(bench: SimulatedBench) -> float:
    """Return the converter's own noise and its rounding [V²/Hz]."""
    converter = bench.converter
    return 2.0 * (converter.noise_v**2 + converter.step_v**2 / 12.0) / bench.rate_hz
