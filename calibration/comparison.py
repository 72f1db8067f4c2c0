"""What a rehearsal measured beside the truth of its simulated bench."""

from collections.abc import Mapping
from dataclasses import dataclass
from math import sqrt
from typing import Any

import numpy as np

from calibration.record import Calibration
from calibration.term import LINE_FIT
from firmware_bridge.simulated.truth import Truth
from metro.budget import Budget
from metro.measured import Measured

__all__ = ["Comparison", "compare", "name_of"]


@dataclass(frozen=True)
class Comparison:
    """One quantity: the truth, what was measured, and how they compare.

    Parameters
    ----------
    name : str
        Such as ``"actuator@87.1Hz"``.
    truth : float
        In the unit of ``measured``.
    measured : Measured
        Result of the analysis.
    efficiency : float or None
        Least u that the noise allows over the u of the line fits in the budget; None where the
        quantity does not rest on a line's noise.
    """

    name: str
    truth: float
    measured: Measured
    efficiency: float | None = None

    @property
    def normalised_error(self) -> float:
        """(measured − truth)/u: mean 0 and standard deviation 1 if u is honest."""
        return (float(self.measured.magnitude) - self.truth) / float(self.measured.u_magnitude)

    def truth_dict(self) -> dict[str, Any]:
        """Return the truth as a quantity in JSON form."""
        return Measured.of(self.truth, self.measured.unit).to_dict()

    @property
    def inside_95(self) -> bool:
        """Whether the truth lies inside the interval of expanded uncertainty at 95 %."""
        return abs(self.normalised_error) <= self.measured.coverage_factor(0.95)


def name_of(quantity: str, frequency_hz: float) -> str:
    """Return the name of a quantity at a line, such as ``actuator@87.1Hz``."""
    return f"{quantity}@{frequency_hz:g}Hz"


def compare(
    calibration: Calibration,
    truth: Truth,
    displacements: Mapping[float, tuple[float, Measured]],
    bounds: Mapping[float, float] | None = None,
) -> list[Comparison]:
    """Return every measured quantity beside its truth.

    Parameters
    ----------
    calibration : Calibration
        The result of the session.
    truth : Truth
        What the bench really was.
    displacements : mapping of float to (float, Measured)
        By line frequency [Hz]: the drive's true amplitude [V] and the amplitude [m] found in the
        converted recordings.
    bounds : mapping of float to float, optional
        By line frequency [Hz]: the least u that the noise allows, relative and in radians.

    Returns
    -------
    list of Comparison
        Actuator magnitude and phase at each line, readout slope, contrast, clock, displacement.
    """
    found = []
    for entry in calibration.actuator:
        frequency_hz = float(entry.frequency.magnitude)
        response = truth.actuator(frequency_hz)
        bound = None if bounds is None else bounds.get(frequency_hz)
        size = float(entry.magnitude.magnitude)
        efficiency = _efficiency(entry.budget, bound, size)
        name = name_of("actuator", frequency_hz)
        found.append(Comparison(name, abs(response), entry.magnitude, efficiency))
        if entry.phase is not None:
            phase_rad = _near(entry.phase, float(np.angle(response)))
            name = name_of("actuator_phase", frequency_hz)
            efficiency = _efficiency(entry.phase_budget, bound, 1.0)
            found.append(Comparison(name, phase_rad, entry.phase, efficiency))
    found.append(Comparison("readout_slope", truth.readout_slope, calibration.readout_slope))
    if calibration.contrast is not None:
        found.append(Comparison("contrast", truth.contrast, calibration.contrast))
    if calibration.clock_offset is not None:
        found.append(Comparison("clock_offset", truth.clock_offset, calibration.clock_offset))
    for frequency_hz, (drive_v, amplitude) in displacements.items():
        moved_m = abs(truth.actuator(frequency_hz)) * drive_v
        found.append(Comparison(name_of("displacement", frequency_hz), moved_m, amplitude))
    return found


def _efficiency(budget: Budget, bound: float | None, size: float) -> float | None:
    """Return the bound over the u of a budget's line fits."""
    fits = [c.effect for c in budget.contributions if c.name.startswith(LINE_FIT)]
    u = sqrt(sum(effect**2 for effect in fits))
    return None if bound is None or not u else bound * size / u


def _near(measured: Measured, truth_rad: float) -> float:
    """Return the true phase on the same turn as the measured one."""
    turns = round((float(measured.magnitude) - truth_rad) / (2 * np.pi))
    return truth_rad + 2 * np.pi * turns
