"""A record near mid-fringe turned into optical phase, sample by sample, on a named slope.

With the extremes known, φ = ∓arccos((V − mid)/swing) undoes the fringe's compression exactly,
for any number of lines at once and any slow motion, as long as the record stays on its slope.
"""

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from calibration.errors import CalibrationError
from calibration.extremes import Extremes

__all__ = ["PhaseRecord", "SlopeMeans", "edge_reasons", "invert_fringe"]

FloatArray = NDArray[np.float64]

SLOPE_SIGN = {"rising": -1.0, "falling": 1.0}  # sign of φ: dV/dφ = −swing·sin φ
EDGE = 0.97  # |cos φ| beyond which noise no longer maps linearly: 14° from an extreme
EDGE_FRACTION_MAX = 0.01  # of the samples may lie there before the record is distrusted


@dataclass(frozen=True)
class SlopeMeans:
    """Means over a record that say how errors of the extremes enter a line (dimensionless).

    ``inverse_sin`` is ⟨1/|sin φ|⟩, ``inverse_sin2`` ⟨1/sin² φ⟩, ``cos_over_sin2`` ⟨cos φ/sin² φ⟩,
    ``cos`` ⟨cos φ⟩ and ``cot`` ⟨cos φ/|sin φ|⟩.
    """

    cos: float
    cot: float
    inverse_sin: float
    inverse_sin2: float
    cos_over_sin2: float


@dataclass(frozen=True)
class PhaseRecord:
    """Phase of a record on one slope.

    Parameters
    ----------
    phase_rad : ndarray, shape (n,)
        Optical phase [rad], NaN where missing or beyond the extremes.
    slope : str
        ``"rising"`` or ``"falling"``.
    means : SlopeMeans
        Averages over the record.
    present, kept : int
        Samples that are there, and those of them well inside the invertible range.
    """

    phase_rad: FloatArray
    slope: str
    means: SlopeMeans
    present: int
    kept: int

    @property
    def distrust_reasons(self) -> list[str]:
        """Return why the record must not be trusted, empty if there is no reason."""
        if not self.kept:
            return ["no sample lies between the extremes"]
        return edge_reasons(1.0 - self.kept / self.present)


def edge_reasons(edge_fraction: float) -> list[str]:
    """Return why a record with this part of its samples near an extreme must not be trusted."""
    if edge_fraction <= EDGE_FRACTION_MAX:
        return []
    return [
        (
            f"the working point wandered off mid-fringe: {100 * edge_fraction:.1f} % of the "
            f"samples lie within {np.degrees(np.arccos(EDGE)):.0f}° of an extreme "
            f"(at most {100 * EDGE_FRACTION_MAX:g} %); a bench that runs freely is tracked by a pilot line"
        )
    ]


def invert_fringe(volts: FloatArray, extremes: Extremes, slope: str) -> PhaseRecord:
    """Return the optical phase of a photodiode record on a named slope.

    Parameters
    ----------
    volts : ndarray, shape (n,)
        Photodiode samples, NaN where missing, in the unit of the extremes.
    extremes : Extremes
        The fringe's extremes.
    slope : str
        ``"rising"`` (φ in −π..0) or ``"falling"`` (φ in 0..π).

    Returns
    -------
    PhaseRecord
        Phase and the averages that carry errors of the extremes.

    Raises
    ------
    CalibrationError
        If the slope has another name.
    """
    if slope not in SLOPE_SIGN:
        raise CalibrationError(f"slope must be 'rising' or 'falling', got {slope!r}")
    cosine = (volts - extremes.mid_v) / extremes.swing_v
    inside = np.abs(cosine) < EDGE
    present = int(np.count_nonzero(np.isfinite(cosine)))
    kept = int(np.count_nonzero(inside))
    phase_rad = np.full(cosine.shape, np.nan)
    np.arccos(cosine, out=phase_rad, where=np.abs(cosine) <= 1.0)
    phase_rad *= SLOPE_SIGN[slope]
    return PhaseRecord(phase_rad, slope, _means(cosine[inside]), present, kept)


def _means(cosine: FloatArray) -> SlopeMeans:
    if not cosine.size:
        return SlopeMeans(0.0, 0.0, 1.0, 1.0, 0.0)
    sin2 = 1.0 - cosine**2
    return SlopeMeans(
        cos=float(np.mean(cosine)),
        cot=float(np.mean(cosine / np.sqrt(sin2))),
        inverse_sin=float(np.mean(1.0 / np.sqrt(sin2))),
        inverse_sin2=float(np.mean(1.0 / sin2)),
        cos_over_sin2=float(np.mean(cosine / sin2)),
    )
