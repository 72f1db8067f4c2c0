"""What a pass over a tracked recording counts for its uncertainty: working points, noise, fast motion."""

from dataclasses import dataclass, field
from math import hypot, sqrt

import numpy as np
from numpy.typing import NDArray

from calibration.conversion_tally import ConversionTally, relative_us
from calibration.extremes import Extremes
from calibration.record import Calibration
from calibration.term import ADC_REFERENCE, FRINGE_EXTREMES, POWER_DRIFT, RULER
from calibration.tracked_piece import TrackedPiece

__all__ = ["TrackedTally"]

FloatArray = NDArray[np.float64]


@dataclass
class TrackedTally:
    """Sums over the inverted samples of a recording.

    Attributes
    ----------
    sums : ConversionTally
        Samples, ⟨1/sin² φ⟩, ⟨cos φ/sin² φ⟩, and fourth differences of the phase.
    residual : float
        Σ of the squared phase over the expected one [rad²].
    carried : int
        Samples carried at the extremes.
    """

    sums: ConversionTally = field(default_factory=ConversionTally)
    residual: float = 0.0
    carried: int = 0

    def add(self, piece: TrackedPiece) -> None:
        """Add samples of the recording.

        Parameters
        ----------
        piece : TrackedPiece
            Joined to those before.
        """
        own, sums = piece.inverted, self.sums
        cosine = np.cos(piece.phase_rad[own])
        sin2 = 1.0 - cosine**2
        sums.kept += int(np.count_nonzero(own))
        sums.converted += int(np.count_nonzero(piece.known))
        sums.inverse_sin2 += float(np.sum(1.0 / sin2))
        sums.cos_over_sin2 += float(np.sum(cosine / sin2))
        rest = np.where(own, piece.phase_rad - piece.expected_rad, np.nan)  # a pilot is no noise
        sums.add_differences(rest)
        self.residual += float(np.sum(rest[own] ** 2))
        self.carried += int(np.count_nonzero(piece.carried))

    @property
    def fast_rad(self) -> float:
        """Rms of what a carried sample leaves out [rad]: motion beside the slow course and the pilot."""
        return sqrt(self.residual / max(1, self.sums.kept))

    def scale_u(self, calibration: Calibration, quantity: str) -> float:
        """Return the relative u of the scale over many fringes, where extremes no longer count.

        Parameters
        ----------
        calibration : Calibration
            Wavelength, index, and for strain the arm length.
        quantity : str
            What the recording becomes.

        Returns
        -------
        float
            Zero for phase.
        """
        if quantity == "phase":
            return 0.0
        slope = float(calibration.readout_slope.magnitude)
        rows = calibration.readout_budget.contributions
        effects = [row.effect / slope for row in rows if row.name in RULER]
        if quantity == "strain":
            effects.append(float(calibration.chain["arm_length"].relative_u or 0.0))
        return hypot(*effects)

    def small_u(
        self, calibration: Calibration, extremes: Extremes, quantity: str, *, drifts: bool
    ) -> float:
        """Return the relative u of a motion that is small against a fringe.

        Parameters
        ----------
        calibration : Calibration
            Its budget.
        extremes : Extremes
            Those that the recording was inverted with.
        quantity : str
            What the recording becomes.
        drifts : bool
            Whether the power may have moved since the extremes were measured.

        Returns
        -------
        float
            As for a recording that stays on its slope, over the working points that it went through.
        """
        scale, drift = relative_us(calibration, quantity, self.sums, extremes)
        return hypot(scale, drift if drifts else 0.0)

    def periodic_rad(self, calibration: Calibration, extremes: Extremes, *, drifts: bool) -> float:
        """Return the rms of the error that comes again in every fringe [rad].

        Parameters
        ----------
        calibration : Calibration
            Power drift and curvature of the converter.
        extremes : Extremes
            Those that the recording was inverted with.
        drifts : bool
            Whether the power may have moved since the extremes were measured.

        Returns
        -------
        float
            From dφ = (δmid + cos φ · δswing)/(swing · sin φ), over the inverted samples.
        """
        count = max(1, self.sums.kept)
        steep, lean = self.sums.inverse_sin2 / count, self.sums.cos_over_sin2 / count
        low, high, swing = np.array([0.5, -0.5]), np.array([0.5, 0.5]), extremes.swing_v
        to_both = np.stack([low, high], axis=1)  # (mid, swing) from (low, high)
        covariance = to_both @ extremes.covariance @ to_both.T
        slope = float(calibration.readout_slope.magnitude)
        dark_v = 0.0 if calibration.dark is None else float(calibration.dark.magnitude)
        for row in calibration.readout_budget.contributions:
            if row.name.startswith(POWER_DRIFT):
                u = row.u * sqrt(1.0 + 1.0 / max(1, extremes.scans)) if drifts else 0.0
                shape = np.array([extremes.mid_v - dark_v, swing]) * u
            elif row.name.startswith((ADC_REFERENCE, FRINGE_EXTREMES, *RULER)):
                continue
            else:
                shape = np.array([0.0, swing]) * row.effect / slope
            covariance = covariance + np.outer(shape, shape)
        weights = np.array([[steep, lean], [lean, max(0.0, steep - 1.0)]])
        return sqrt(max(0.0, float(np.sum(weights * covariance)))) / swing
