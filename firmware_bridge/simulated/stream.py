"""The samples of one recording on the simulated bench: light, electronics, converter.

Photodiode: two beams interfere, the laser's power breathes, the arms wander and ring, the actuator
moves one mirror and tilts the beam a little; then shot and Johnson noise, amplifier and
anti-alias poles, pick-up of the drive and the mains, and the converter with its errors.
"""

from collections.abc import Callable
from dataclasses import dataclass
from math import pi

import numpy as np
from numpy.typing import NDArray

from firmware_bridge.simulated.live_drive import LiveDrive
from firmware_bridge.simulated.motion import Component, Motion
from firmware_bridge.simulated.response import AHEAD, pole_gain, taps_for_poles
from firmware_bridge.simulated.setup import Setup
from firmware_bridge.simulated.truth import Truth
from metro.kernel.noise import johnson_voltage, shot_current

__all__ = ["Converter", "Electronics", "SampleStream"]

FloatArray = NDArray[np.float64]
CodeArray = NDArray[np.int16]
Response = Callable[[float], complex]

# Motion of the arms [m]: a slow wander, ground-like components falling with frequency, and two
# resonances of a table. Sizes are those of an ordinary optical table; they are ours.
ARM_MOTION = (
    Component(10e-9, 25.0),
    Component(3e-9, 1.5),
    Component(0.6e-9, 0.08),
    Component(0.15e-9, 0.004),
    Component(1.0e-9, 0.6, 17.3),
    Component(0.5e-9, 0.25, 58.4),
)
# Relative laser power within a recording; its slow change is the drift that the bench states.
POWER_NOISE = (Component(6e-5, 0.3), Component(3e-5, 0.003))
MAINS_V = 1.2e-4  # on the photodiode channel, where the bench states nothing
MAINS_SHARES = (1.0, 0.42, 0.25)  # of it: mains, 2nd and 3rd harmonic
MAINS_M = 3e-10  # the mains also shakes the mirror a little
AMPLIFIER_TEMPERATURE_K = 300.0


@dataclass(frozen=True)
class Converter:
    """The analogue-to-digital converter: bits, range [V] (from −range/2 to +range/2), noise [V]."""

    bits: int
    range_v: float
    noise_v: float

    @property
    def step_v(self) -> float:
        """One code [V]."""
        return self.range_v / 2.0**self.bits

    def codes(self, volts: FloatArray, truth: Truth) -> CodeArray:
        """Return int16 codes of true volts, the converter's scale and curvature errors included."""
        x = volts / (self.range_v / 2)
        bent = truth.quadratic * (1.0 - x**2) + truth.cubic * (x**3 - x)
        read = volts * (1.0 + truth.reference) + self.range_v * bent
        top = 2 ** (self.bits - 1)
        return np.clip(np.rint(read / self.step_v), -top, top - 1).astype(np.int16)


@dataclass(frozen=True)
class Electronics:
    """The rest of the photodiode's channel: transimpedance [V/A]; mains frequency [Hz], size [V]."""

    transimpedance_v_per_a: float
    mains_hz: float
    mains_v: float = MAINS_V


class SampleStream:
    """Both channels of one recording, from a seed; the same samples whatever the block lengths.

    Parameters
    ----------
    setup : Setup
        State of the bench.
    truth : Truth
        The drawn bench.
    converter, electronics : Converter, Electronics
        The readout's nominal side.
    rate_hz : float
        Nominal sample rate [Hz]; the true one is rate·(1 + clock).
    seed : list of int
        Seed of this recording's noise.
    drive : LiveDrive, optional
        Lines that are set while it runs, beside those of the state.
    """

    def __init__(
        self,
        setup: Setup,
        truth: Truth,
        converter: Converter,
        electronics: Electronics,
        rate_hz: float,
        seed: list[int],
        drive: LiveDrive | None = None,
    ) -> None:
        self._setup, self._truth, self._converter = setup, truth, converter
        self._electronics = electronics
        self._rate_hz = rate_hz * (1.0 + truth.clock)
        motion_rng, power_rng, operator_rng, self._light_rng, self._converter_rng = (
            np.random.default_rng(seed).spawn(5)
        )
        self._motion = Motion(ARM_MOTION, self._rate_hz, motion_rng)
        self._power = Motion(POWER_NOISE, self._rate_hz, power_rng)
        self._working_rad = setup.working_phase_rad(operator_rng)
        self._power_scale = 1.0 + truth.power_drift_u * float(operator_rng.normal())
        self._mains_phase_rad = float(operator_rng.uniform(-pi, pi))
        self._taps = taps_for_poles(truth.readout_corners_hz, rate_hz)
        self._behind = self._taps.size - 1 - AHEAD
        self._next = -self._behind  # the filter's history: samples before the first one sent
        self._live = drive or LiveDrive()
        self._live.restart(self._next / self._rate_hz)
        self._start_m: float | None = None  # where the arms are when the operator sets mid-fringe
        self._held = self._light(AHEAD + self._behind)
        self._sent = 0

    def block(self, count: int) -> CodeArray:
        """Return the next ``count`` samples, shape (count, 2): photodiode and drive codes."""
        held = np.concatenate([self._held, self._light(count)])
        self._held = held[count:]
        time_s = (self._sent + np.arange(count)) / self._rate_hz
        self._sent += count
        photodiode_v = np.convolve(held, self._taps, mode="valid")
        photodiode_v += self._truth.dark_v + self._interference(time_s)
        drive_v = self._drive_reading(time_s)
        volts = np.stack([photodiode_v, drive_v], axis=1)
        self._live.advance(self._next / self._rate_hz)
        volts += self._converter_rng.normal(0.0, self._converter.noise_v, volts.shape)
        return self._converter.codes(volts, self._truth)

    def _light(self, count: int) -> FloatArray:
        """Return the amplifier's input-referred voltage before its poles, shape (count,)."""
        time_s = (self._next + np.arange(count)) / self._rate_hz
        self._next += count
        motion_m, power = self._motion.block(count), self._power.block(count)
        if self._start_m is None:
            self._start_m = float(motion_m[0])
        motion_m -= self._start_m
        if self._setup.drift is not None:
            motion_m += self._setup.drift.metres(time_s)
        optical_v = self._optical(time_s, motion_m) * (self._power_scale + power)
        impedance = self._electronics.transimpedance_v_per_a
        shot_v = impedance * shot_current(1.0 / impedance)  # at one volt; grows as its root
        johnson_v = johnson_voltage(impedance, AMPLIFIER_TEMPERATURE_K)
        variance = shot_v**2 * np.maximum(optical_v, 0.0) + johnson_v**2
        noise_v = np.sqrt(variance * self._rate_hz / 2) * self._light_rng.normal(size=count)
        return np.asarray(optical_v + noise_v)

    def _optical(self, time_s: FloatArray, motion_m: FloatArray) -> FloatArray:
        """Return the photodiode voltage of the light alone [V], shape (n,)."""
        truth, beam = self._truth, self._setup.beam
        mid_v = truth.swing_v / truth.contrast
        tilt = 1.0 + truth.tilt_per_v * self._drive(time_s)
        if beam == "blocked":
            return np.zeros(time_s.size)
        if beam != "both":
            return 0.5 * mid_v * (tilt if beam == truth.moved_arm else np.ones(time_s.size))
        phase = truth.phase_per_metre * (self._actuator_m(time_s) + motion_m)
        phase += self._working_rad
        shaken = MAINS_M * truth.phase_per_metre
        phase += shaken * np.cos(2 * pi * self._electronics.mains_hz * time_s)
        swing = truth.swing_v * np.sqrt(np.maximum(tilt, 0.0))
        return np.asarray(0.5 * mid_v * (1.0 + tilt) + swing * np.cos(phase))

    def _drive(self, time_s: FloatArray) -> FloatArray:
        """Return the drive at the actuator's terminals [V], shape (n,)."""
        drive_v = self._tones(time_s, lambda _frequency_hz: 1.0 + 0.0j)
        if self._setup.scan is not None:
            drive_v = drive_v + self._setup.scan.volts(time_s)
        return drive_v

    def _actuator_m(self, time_s: FloatArray) -> FloatArray:
        """Return the differential displacement that the drive makes [m], shape (n,)."""
        moved_m = self._tones(time_s, self._truth.actuator)
        if self._setup.scan is not None:
            moved_m = moved_m + self._truth.gain_m_per_v * self._setup.scan.volts(time_s)
        return moved_m

    def _interference(self, time_s: FloatArray) -> FloatArray:
        """Return what the wires add to the photodiode channel [V]: drive pick-up and mains."""
        pickup = self._truth.pickup_v_per_v
        added_v = self._tones(time_s, lambda frequency_hz: pickup * frequency_hz / 100.0)
        for order, share in enumerate(MAINS_SHARES, start=1):
            turn = 2 * pi * order * self._electronics.mains_hz * time_s
            amplitude_v = share * self._electronics.mains_v
            added_v = added_v + amplitude_v * np.cos(turn + order * self._mains_phase_rad)
        return added_v

    def _drive_reading(self, time_s: FloatArray) -> FloatArray:
        """Return the drive at the converter's second input [V], sampled its delay later."""
        truth = self._truth
        late_s = time_s + truth.channel_delay_s
        read_v = self._tones(late_s, lambda f: pole_gain(f, truth.drive_corners_hz))
        if self._setup.scan is not None:
            read_v = read_v + self._setup.scan.volts(late_s)
        return np.asarray(read_v / truth.divider / truth.drive_gain)

    def _tones(self, time_s: FloatArray, response: Response) -> FloatArray:
        """Return the sum of the drive's tones, each times a complex response."""
        total = np.zeros(time_s.size)
        for tone in self._setup.tones:
            gain = response(tone.frequency_hz)
            turn = 2 * pi * tone.frequency_hz * time_s + tone.phase_rad + np.angle(gain)
            total += tone.amplitude_v * abs(gain) * np.cos(turn)
        return total + self._live.volts(time_s, response)
