"""From bench, lines and a wanted uncertainty to a plan with its reasons and cautions."""

from __future__ import annotations

import math
from dataclasses import dataclass
from functools import cached_property
from typing import TYPE_CHECKING

from metro.budget import Budget, Contribution
from metro.collisions import collisions
from metro.depths import LINEAR_LOSS, compressions, harmonics
from metro.drive_setting import Setting
from metro.intermodulation import products
from metro.kernel.noise import LEAST_SNR, signal_to_noise
from metro.plan import Plan, PlanError, PlannedLine, PlannedProduct
from metro.plan_cautions import (
    RESONANT,
    actuator_cautions,
    fringe_checks,
    noise_cautions,
    safety_cautions,
    unstated_cautions,
    wish_cautions,
)

if TYPE_CHECKING:
    from collections.abc import Sequence

    from metro.bench import Bench
    from metro.motion import LineNoise

__all__ = ["make_plan"]

OFFSET_RAD = 0.1  # how well a person sets mid-fringe with a voltmeter: common practice
LONGEST_S = 3600.0  # beyond it the bench drifts more than averaging gains: common practice
_SHOWN_PRODUCTS = 6


def make_plan(
    bench: Bench,
    wanted_u: float,
    frequencies_hz: Sequence[float] = (),
    *,
    duration_s: float | None = None,
    loss: float = LINEAR_LOSS,
) -> Plan:
    """Return which drive at which line for which time reaches a wanted uncertainty.

    Parameters
    ----------
    bench : Bench
        Needs the wavelength, the actuator's gain, and enough for the noise.
    wanted_u : float
        Relative standard uncertainty of metres per volt at every line.
    frequencies_hz : sequence of float, optional
        The lines [Hz]; those of the bench if empty.
    duration_s : float, optional
        Time of each lines recording [s]; as long as needed if not given.
    loss : float
        Largest compression of a line by the curve of the fringe.

    Returns
    -------
    Plan
        With reasons where a line or the whole must not be trusted.

    Raises
    ------
    PlanError
        If there is no line, one cannot be sampled, the noise is unknown, or the wanted uncertainty
        lies below what the bench's stated u allow.
    BenchError, ChainError
        If the bench lacks what cannot be done without.
    """
    for name, value in (("uncertainty", wanted_u), ("compression", loss)):
        if not 0.0 < value < 1.0:
            raise PlanError(f"{name} must be > 0 and < 1, got {value!r}")
    for name, values in (("line", frequencies_hz), ("duration", (duration_s or 1.0,))):
        if not all(math.isfinite(value) and value > 0.0 for value in values):
            raise PlanError(f"each {name} must be finite and > 0, got {list(values)!r}")
    return _Planner(Setting(bench, wanted_u, tuple(frequencies_hz), duration_s, loss)).plan()


@dataclass(frozen=True)
class _Planner:
    """The plan that a setting makes."""

    set: Setting

    def plan(self) -> Plan:
        """Return everything together."""
        reasons, cautions = fringe_checks(self.set.bench, *self.set.fringe_v)
        if self.set.duration_s > LONGEST_S:
            reasons.append(
                f"each recording would take {self.set.duration_s / 3600:.3g} h, through which no bench stays"
                " as it is: ask for less, or lower the noise"
            )
        return Plan(
            wanted_u=self.set.wanted_u,
            duration_s=self.set.duration_s,
            drive_point=self.set.bench.text("drive.point") or "actuator terminals",
            drive_reading=self.set.bench.text("drive.reading") or "peak",
            limit=self.set.limit.reason if self.set.is_limited else None,
            lines=self._planned(),
            products=self._products(),
            cautions=[*self._cautions(), *cautions],
            reasons=reasons,
        )

    def _planned(self) -> tuple[PlannedLine, ...]:
        depths = self.set.depths_rad
        losses = compressions(depths)
        return tuple(
            self._line(place, losses[place], harmonics(depths, place, OFFSET_RAD))
            for place in range(len(self.set.lines))
        )

    def _line(self, place: int, loss: float, overtones: tuple[float, float]) -> PlannedLine:
        frequency, floor = self.set.frequencies_hz[place], self.set.floors[place]
        amplitude, noise = self.set.displacements_m[place], self.set.noises[place]
        snr = signal_to_noise(amplitude, noise.total, self.set.duration_s)
        budget = Budget([*floor.budget.contributions, *self._fit_terms(amplitude, noise)], unit="1")
        expected = budget.combined()[0]
        return PlannedLine(
            frequency_hz=frequency,
            drive_v=self.set.actuator.reading_v(self.set.terminals_v[place]),
            terminals_v=self.set.terminals_v[place],
            displacement_m=amplitude,
            phase_rad=self.set.depths_rad[place],
            noise_m=noise.total,
            snr=snr,
            floor_u=floor.relative_u,
            expected_u=expected,
            compression=loss,
            second_harmonic=overtones[0],
            third_harmonic=overtones[1],
            budget=budget,
            reasons=[*self._collisions[place], *self._line_reasons(frequency, expected, snr)],
        )

    def _fit_terms(self, amplitude_m: float, noise: LineNoise) -> list[Contribution]:
        """Return the statistics of a line, the mean of one record on each slope."""
        records = {"line fit": noise.total, "noise of the drive reading": noise.drive}
        root = amplitude_m * math.sqrt(self.set.duration_s)
        return [
            Contribution(name, 1.0, density / root, math.sqrt(0.5), "A")
            for name, density in records.items()
            if density
        ]

    @cached_property
    def _collisions(self) -> list[list[str]]:
        return collisions(
            self.set.frequencies_hz,
            self.set.depths_rad,
            self.set.duration_s,
            mains_hz=self.set.mains_hz,
            rate_hz=self.set.rate_hz,
            matters=0.1 * self.set.wanted_u,
            offset_rad=OFFSET_RAD,
        )

    def _line_reasons(self, frequency_hz: float, expected_u: float, snr: float) -> list[str]:
        reasons = []
        if snr < LEAST_SNR:
            reasons.append(
                f"{self.set.duration_s:g} s are too short: signal to noise {snr:.2g}, {LEAST_SNR:g} is"
                f" needed, as {self.set.limit.reason}"
            )
        if expected_u > 1.02 * self.set.wanted_u:  # more than the rounding of the drive
            reasons.append(
                f"{self.set.duration_s:g} s are too short: u is {100 * expected_u:.3g} %, as"
                f" {self.set.limit.reason}"
            )
        response = self.set.actuator.response(frequency_hz)
        if not 1.0 / RESONANT < response < RESONANT:
            reasons.append(
                f"the actuator's resonance at {self.set.actuator.resonance_hz:g} Hz makes the response"
                f" {response:.2g} times that of a slow drive: the drive cannot be foretold"
            )
        return reasons

    def _products(self) -> tuple[PlannedProduct, ...]:
        made = products(
            self.set.frequencies_hz,
            self.set.depths_rad,
            rate_hz=self.set.rate_hz,
            offset_rad=OFFSET_RAD,
        )
        return tuple(
            PlannedProduct(p.frequency_hz, p.relative, p.text) for p in made[:_SHOWN_PRODUCTS]
        )

    def _cautions(self) -> list[str]:
        unstated = dict.fromkeys(key for floor in self.set.floors for key in floor.unstated)
        cautions = [
            *wish_cautions(self.set.wanted_u),
            *noise_cautions(self.set.bench, self.set.noises, self.set.frequencies_hz),
            *unstated_cautions(list(unstated)),
            *actuator_cautions(self.set.actuator, self.set.bench, self.set.frequencies_hz),
            *self._readout_cautions(),
        ]
        if self.set.bench.get("mains.frequency") is None:
            cautions.append("no mains.frequency: the lines are kept away from 50 Hz and 60 Hz")
        peak_v = math.fsum(self.set.terminals_v)
        return [*cautions, *safety_cautions(self.set.bench, peak_v, self.set.actuator.limit_v)]

    def _readout_cautions(self) -> list[str]:
        if self.set.rate_hz is None:
            return ["no adc.rate: what folds down from above half the rate was not looked for"]
        cautions = []
        for frequency in self.set.frequencies_hz:
            left = abs(self.set.chain.readout.response(frequency))
            if left < 0.98:
                cautions.append(
                    f"amplifier, filter and aperture leave {100 * left:.3g} % of the line at"
                    f" {frequency:g} Hz; what the drive's channel does not share has to be corrected"
                )
        return cautions
