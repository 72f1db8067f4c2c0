"""Drives and duration that reach a wanted uncertainty.

Each line's u is that of metres per volt, measured once on each slope of the fringe for the time T:
u² = floor² + S/(2T)/A², with the noise density S beside the line and the amplitude A. All lines are
given the same statistical share, so that A grows as √S, but never less than a fit needs to see it;
the amplitudes go up together until the linear range, the drive limit or the converter's range ends
them, and the time follows.
"""

from __future__ import annotations

import math
from dataclasses import dataclass
from functools import cached_property
from itertools import pairwise
from typing import TYPE_CHECKING

from metro.actuator import Actuator
from metro.bench_entry import BenchLine
from metro.chain import Chain
from metro.collisions import MAINS_WANDER
from metro.depths import Limit, largest_scale
from metro.floor import Floor, floor_of, is_drive_read
from metro.kernel.noise import LEAST_SNR
from metro.motion import LineNoise, line_noise
from metro.planned_line import PlanError

if TYPE_CHECKING:
    from metro.bench import Bench

__all__ = ["Setting"]

LEAST_S = 10.0  # scans and handling take as long: shorter recordings save nothing
LEAST_CYCLES = 100.0
MAINS_APART_HZ = 0.1  # no time is spent on a line nearer to what the mains sweeps
LEAST_APART = 10.0  # reciprocal durations between neighbours, for the noise beside each to be seen
PLANNED_SNR = 3.0 * LEAST_SNR  # the gain is known roughly, and some recordings are shorter
ROUNDING = 1.01  # the most that three digits add to a drive


@dataclass(frozen=True)
class Setting:
    """Drives and duration of one plan; each step is computed once, from those before it.

    Parameters
    ----------
    bench : Bench
        What is known.
    wanted_u : float
        Wanted relative standard uncertainty.
    given_hz : tuple of float
        Lines asked for [Hz]; those of the bench if empty.
    given_s : float or None
        Duration asked for [s].
    loss : float
        Largest compression of a line.
    """

    bench: Bench
    wanted_u: float
    given_hz: tuple[float, ...]
    given_s: float | None
    loss: float

    @cached_property
    def lines(self) -> tuple[BenchLine, ...]:
        """The lines, as the bench states them where it does; refused where they cannot be sampled."""
        stated = {line.frequency_hz: line for line in self.bench.lines}
        found = tuple(stated.get(f, BenchLine(f)) for f in self.given_hz or stated)
        if not found:
            raise PlanError("a plan needs lines: give --line 87.1Hz or [[line]] in the bench file")
        for line in found:
            if [other.frequency_hz for other in found].count(line.frequency_hz) > 1:
                raise PlanError(f"each line must be given once, got {line.frequency_hz:g} Hz twice")
            if self.rate_hz is not None and line.frequency_hz >= 0.5 * self.rate_hz:
                raise PlanError(
                    f"line must be < {0.5 * self.rate_hz:g} Hz, half of adc.rate,"
                    f" got {line.frequency_hz:g} Hz"
                )
        return found

    @property
    def frequencies_hz(self) -> list[float]:
        """Frequencies of the lines [Hz]."""
        return [line.frequency_hz for line in self.lines]

    @cached_property
    def rate_hz(self) -> float | None:
        """Sampling rate [Hz]; None where not given."""
        rate = self.bench.get("adc.rate")
        return None if rate is None else float(rate.magnitude)

    @cached_property
    def chain(self) -> Chain:
        """The bench's signal chain at mid-fringe."""
        return Chain(self.bench)

    @cached_property
    def per_metre(self) -> float:
        """Phase per displacement [rad/m]."""
        return abs(float(self.chain.convert(1.0, "displacement", "phase")))

    @cached_property
    def actuator(self) -> Actuator:
        """The actuator, roughly."""
        return Actuator.of(self.bench)

    @cached_property
    def fringe_v(self) -> tuple[float | None, float | None]:
        """(high − low)/2 and (high + low)/2 [V]."""
        here = self.chain.working_point()
        slope = here.slope_v_rad  # at mid-fringe the slope is half the height
        return None if slope is None else abs(slope), here.voltage_v

    @cached_property
    def noises(self) -> list[LineNoise]:
        """The noise beside each line."""
        found = [line_noise(self.chain, f, self._read_m_per_v(f)) for f in self.frequencies_hz]
        for noise, frequency in zip(found, self.frequencies_hz, strict=True):
            if noise.total == 0.0:
                raise PlanError(
                    f"no noise is known beside {frequency:g} Hz: [[motion]] must be > 0 m/√Hz there, or the"
                    " bench must tell more of light and electronics"
                )
        return found

    def _read_m_per_v(self, frequency_hz: float) -> float:
        """Return the displacement per volt of the drive as the converter reads it [m/V]."""
        if not is_drive_read(self.bench):
            return 0.0
        terminals = self.bench.magnitude("drive.divider", 1.0) * self.actuator.terminal_factor
        return terminals * self.actuator.gain_m_v * self.actuator.response(frequency_hz)

    @cached_property
    def floors(self) -> list[Floor]:
        """The floor at each line; refused where the wanted u lies below one."""
        found = [floor_of(self.bench, line, self.fringe_v[0]) for line in self.lines]
        worst = max(found, key=lambda floor: floor.relative_u)
        if worst.relative_u >= self.wanted_u:
            frequency = self.frequencies_hz[found.index(worst)]
            shares = sorted(worst.budget.contributions, key=lambda c: -abs(c.effect))[:2]
            names = ", ".join(f"{c.name} {100 * abs(c.effect):.3g} %" for c in shares)
            raise PlanError(
                f"uncertainty must be > {100 * worst.relative_u:.4g} %, below which no drive and no"
                f" time lead at {frequency:g} Hz (largest: {names}), got {100 * self.wanted_u:.4g} %"
            )
        return found

    @cached_property
    def unit_m(self) -> list[float]:
        """Amplitudes that would do in one second [m]."""
        return [
            math.hypot(noise.total, noise.drive)
            * max(PLANNED_SNR, (2.0 * (self.wanted_u**2 - floor.relative_u**2)) ** -0.5)
            for noise, floor in zip(self.noises, self.floors, strict=True)
        ]

    @cached_property
    def limit(self) -> Limit:
        """How far those amplitudes may be scaled."""
        drives = [
            self.actuator.terminals_v(m, f)
            for m, f in zip(self.unit_m, self.frequencies_hz, strict=True)
        ]
        return largest_scale(
            [m * self.per_metre for m in self.unit_m],
            drives,
            loss=self.loss,
            limit_v=self.actuator.limit_v,
            read_v=self._readable_v(),
        )

    def _readable_v(self) -> float | None:
        """Return the voltage at the terminals at which the converter's drive channel ends."""
        if self.bench.get("adc.range") is None or not is_drive_read(self.bench):
            return None
        half_v = 0.5 * self.bench.magnitude("adc.range")
        point_v = half_v * self.bench.magnitude("drive.divider", 1.0)
        return point_v * self.actuator.terminal_factor

    @cached_property
    def duration_s(self) -> float:
        """Duration of each lines recording [s]."""
        if self.given_s is not None:
            return self.given_s
        # longer than the limit asks for, so that drives can be rounded up below it
        least_s = (ROUNDING / self.limit.scale) ** 2
        return max(_rounded_up(least_s), _rounded_up(self._least_s()))

    def _least_s(self) -> float:
        """Return the time that resolves each line from its neighbours and the mains."""
        frequencies = sorted(self.frequencies_hz)
        apart = [b - a for a, b in pairwise(frequencies)]
        for mains in self.mains_hz:
            for frequency in frequencies:
                order = max(1, round(frequency / mains))
                away = abs(frequency - order * mains) - MAINS_WANDER * order * mains
                apart += [away] if away > MAINS_APART_HZ else []  # else a reason, however long
        nearest = min(apart, default=math.inf)
        return max(LEAST_S, LEAST_CYCLES / frequencies[0], LEAST_APART / nearest)

    @property
    def mains_hz(self) -> tuple[float, ...]:
        """Frequencies of the mains to keep away from [Hz]."""
        stated = self.bench.get("mains.frequency")
        return (50.0, 60.0) if stated is None else (float(stated.magnitude),)

    @cached_property
    def terminals_v(self) -> list[float]:
        """Amplitude of each line at the actuator's terminals, zero to peak [V]."""
        wanted = self.duration_s**-0.5
        # up, so that the wanted u is reached; down where a limit lies too near for that
        has_room = wanted * ROUNDING <= self.limit.scale * (1 + 1e-9)
        scale = min(wanted, self.limit.scale)
        return [
            _three_digits(self.actuator.terminals_v(scale * m, f), up=has_room)
            for m, f in zip(self.unit_m, self.frequencies_hz, strict=True)
        ]

    @cached_property
    def displacements_m(self) -> list[float]:
        """Amplitude of each line in differential displacement [m]."""
        return [
            volts * self.actuator.gain_m_v * self.actuator.response(f)
            for volts, f in zip(self.terminals_v, self.frequencies_hz, strict=True)
        ]

    @property
    def depths_rad(self) -> list[float]:
        """Amplitude of each line in optical phase [rad]."""
        return [m * self.per_metre for m in self.displacements_m]

    @property
    def is_limited(self) -> bool:
        """Whether a limit, not the time, sets the drives; 5 % are the rounding of the time."""
        return bool(self.limit.scale <= 1.05 * self.duration_s**-0.5)


def _three_digits(volts: float, *, up: bool) -> float:
    """Return a voltage of three digits, as a generator is set; at most 1 % from what is asked for."""
    step = 10.0 ** (math.floor(math.log10(volts)) - 2)
    digits = math.ceil(volts / step - 1e-9) if up else math.floor(volts / step + 1e-9)
    return float(f"{step * digits:.3g}")


def _rounded_up(seconds: float) -> float:
    """Return a time rounded up to two digits."""
    step = 10.0 ** (math.floor(math.log10(seconds)) - 1)
    return float(f"{step * math.ceil(seconds / step - 1e-9):.3g}")
