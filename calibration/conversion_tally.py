"""What a pass over a recording counts for its conversion: samples, noise, and working points."""

from dataclasses import dataclass
from math import sqrt

import numpy as np
from numpy.typing import NDArray

from calibration.extremes import Extremes
from calibration.record import Calibration
from calibration.term import ADC_REFERENCE, FRINGE_EXTREMES, POWER_DRIFT, RULER
from calibration.working_point import invert_fringe

__all__ = ["ConversionTally", "relative_us"]

FloatArray = NDArray[np.float64]


@dataclass
class ConversionTally:
    """Counts over the blocks of a recording.

    ``filtered`` and the two after it count what filters leave; None without filters.
    """

    present: int = 0
    kept: int = 0
    converted: int = 0
    differences: int = 0
    square: float = 0.0
    inverse_sin2: float = 0.0
    cos_over_sin2: float = 0.0
    filtered: int | None = None
    filtered_differences: int = 0
    filtered_square: float = 0.0

    def add(self, volts: FloatArray, extremes: Extremes, slope: str) -> None:
        """Add a block as it was read."""
        phase = invert_fringe(volts, extremes, slope)
        self.present += phase.present
        self.kept += phase.kept
        self.converted += int(np.count_nonzero(np.isfinite(phase.phase_rad)))
        self.inverse_sin2 += phase.kept * phase.means.inverse_sin2
        self.cos_over_sin2 += phase.kept * phase.means.cos_over_sin2
        self.add_differences(phase.phase_rad)

    def add_differences(self, phase_rad: FloatArray) -> None:
        """Add the noise of a block of phases."""
        count, square = _fourth_differences(phase_rad)
        self.differences += count
        self.square += square

    def count_filtered(self, values: FloatArray) -> None:
        """Add a block as the filters leave it."""
        self.filtered = (self.filtered or 0) + int(np.count_nonzero(np.isfinite(values)))
        count, square = _fourth_differences(values)
        self.filtered_differences += count
        self.filtered_square += square

    @property
    def used(self) -> int:
        """Samples that came out."""
        return self.converted if self.filtered is None else self.filtered

    def noise(self, per_radian: float) -> float:
        """Return the rms of the noise from sample to sample, in the converted unit."""
        if self.filtered is not None:
            count, square, scale = self.filtered_differences, self.filtered_square, 1.0
        else:
            count, square, scale = self.differences, self.square, per_radian
        return scale * sqrt(square / count) if count else float("nan")


def relative_us(
    calibration: Calibration,
    quantity: str,
    tally: ConversionTally,
    extremes: Extremes | None = None,
) -> tuple[float, float]:
    """Return the scale's relative u and that of the recording's own drift, at its working points.

    With the calibration's extremes unless others are given.
    """
    extremes = extremes or calibration.extremes
    slope = float(calibration.readout_slope.magnitude)
    steep, lean = (v / max(1, tally.kept) for v in (tally.inverse_sin2, tally.cos_over_sin2))
    rows = {c.name: c for c in calibration.readout_budget.contributions}
    drifts = [row for name, row in rows.items() if name.startswith(POWER_DRIFT)]
    left_out = {ADC_REFERENCE, FRINGE_EXTREMES, *(row.name for row in drifts)}
    left_out |= set(RULER) if quantity == "phase" else set()
    effects = [row.effect / slope for name, row in rows.items() if name not in left_out]
    effects.append(extremes.u_of(steep / extremes.swing_v, lean / extremes.swing_v))
    if quantity == "strain":
        effects.append(float(calibration.chain["arm_length"].relative_u or 0.0))
    dark_v = 0.0 if calibration.dark is None else float(calibration.dark.magnitude)
    moved = steep + (extremes.mid_v - dark_v) / extremes.swing_v * lean
    drift_u = abs(moved) * sqrt(sum(row.u**2 for row in drifts))
    if extremes.scans:
        effects.append(drift_u / sqrt(extremes.scans))
    return sqrt(sum(effect**2 for effect in effects)), drift_u


def _fourth_differences(values: FloatArray) -> tuple[int, float]:
    """Return how many there are, and the sum of the variances that they stand for.

    They leave motion and lines well below half the rate alone; white noise of rms σ gives them
    (1 + 16 + 36 + 16 + 1)σ² = 70σ².
    """
    fourth = np.diff(values, 4)
    fourth = fourth[np.isfinite(fourth)]
    return fourth.size, float(np.sum(fourth**2)) / 70.0
