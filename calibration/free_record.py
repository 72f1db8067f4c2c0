"""A lines recording of a bench that runs freely: tracked by a pilot, inverted on both slopes, fitted."""

from collections.abc import Callable, Sequence
from dataclasses import dataclass
from math import pi
from pathlib import Path

import numpy as np
from numpy.typing import NDArray

from calibration.extremes import Extremes
from calibration.line_fit import LineFit
from calibration.pilot_drive import driven_pilot
from calibration.session import RoleRecord
from calibration.slope_line import is_driven, is_noise_known
from calibration.tracking import TrackedPhase, track_phase
from calibration.working_point import SlopeMeans

__all__ = ["FREE_RANGE", "OWN_GAPS", "FreeMeans", "FreeRecord"]

FloatArray = NDArray[np.float64]

FREE_RANGE = "extremes known, a pilot of 0.03 rad to 2.3 rad, drift slow against the pilot"
# what a line fit says of gaps that alias: here they are the extremes, left out, and its u counts them
OWN_GAPS = "the pattern of the gaps aliases"
_LEVELS = 64  # working points that stand for all inverted samples


@dataclass(frozen=True)
class FreeMeans:
    """Averages over the inverted samples, which lie on both slopes.

    Parameters
    ----------
    means : SlopeMeans
        As for a record on one slope, whatever the side.
    signed_inverse_sin, signed_cot : float
        ⟨1/sin φ⟩ and ⟨cot φ⟩: what is left where both slopes were passed alike is next to nothing.
    cosines : tuple of float
        Working points cos φ, each of an equal part of the samples.
    """

    means: SlopeMeans
    signed_inverse_sin: float
    signed_cot: float
    cosines: tuple[float, ...]

    @classmethod
    def of(cls, phase_rad: FloatArray) -> "FreeMeans":
        """Return the averages over inverted phases.

        Parameters
        ----------
        phase_rad : ndarray, shape (n,)
            Clear of the extremes [rad]; may be empty.
        """
        if not phase_rad.size:
            return cls(SlopeMeans(0.0, 0.0, 1.0, 1.0, 0.0), 1.0, 0.0, (0.0,))
        cosine, sine = np.cos(phase_rad), np.sin(phase_rad)
        means = SlopeMeans(
            cos=float(np.mean(cosine)),
            cot=float(np.mean(cosine / np.abs(sine))),
            inverse_sin=float(np.mean(1.0 / np.abs(sine))),
            inverse_sin2=float(np.mean(1.0 / sine**2)),
            cos_over_sin2=float(np.mean(cosine / sine**2)),
        )
        places = (np.arange(_LEVELS) + 0.5) / _LEVELS
        levels = np.quantile(cosine, places).tolist()
        signed = float(np.mean(1.0 / sine)), float(np.mean(cosine / sine))
        return cls(means, *signed, tuple(levels))


@dataclass(frozen=True)
class FreeRecord:
    """One free-running lines recording, tracked and fitted.

    Parameters
    ----------
    record : RoleRecord
        The recording.
    tracked : TrackedPhase
        Phase and masks.
    fit : LineFit
        Lines in the inverted samples.
    means : FreeMeans
        Averages over them.
    """

    record: RoleRecord
    tracked: TrackedPhase
    fit: LineFit
    means: FreeMeans

    @classmethod
    def of(
        cls,
        record: RoleRecord,
        extremes: Extremes,
        pilot_hz: float,
        motion_rad: float,
        fit: Callable[[RoleRecord, FloatArray], LineFit],
        lines_hz: Sequence[float] = (),
    ) -> "FreeRecord":
        """Return a recording tracked and fitted.

        Parameters
        ----------
        record : RoleRecord
            Photodiode, and the drive where it was recorded.
        extremes : Extremes
            The fringe's extremes.
        pilot_hz : float
            The pilot [Hz].
        motion_rad : float
            Phase of the motion over the drive at the pilot, to half a turn [rad].
        fit : callable
            Fits lines to a record's phase.
        lines_hz : sequence of float
            All lines that may be driven [Hz].

        Raises
        ------
        CalibrationError
            If the pilot is not in the drive, or nowhere seen.
        """
        seen_hz, phase_rad = pilot_hz, None
        if record.drive is not None:
            seen_hz, driven_rad = driven_pilot(record.drive, pilot_hz)
            phase_rad = (driven_rad + motion_rad) % (2.0 * pi)
        trace = record.photodiode
        levels = extremes.low_v, extremes.high_v
        tracked = track_phase(
            trace.values,
            trace.rate_hz,
            *levels,
            seen_hz,
            pilot_phase_rad=phase_rad,
            others_hz=[line_hz * seen_hz / pilot_hz for line_hz in lines_hz],
            in_board_time=phase_rad is not None,
        )
        means = FreeMeans.of(tracked.phase_rad[tracked.inverted])
        lines = fit(record, tracked.for_lines)
        return cls(record, tracked, lines, means)

    @property
    def name(self) -> str:
        """Name of the file."""
        return Path(self.record.path).name

    @property
    def reasons(self) -> list[str]:
        """Why the recording must not be trusted, with its name."""
        return [f"{self.name}: {reason}" for reason in self.tracked.reasons]

    def line_reasons(self, number: int) -> list[str]:
        """Return why a line of the recording must not be trusted.

        Parameters
        ----------
        number : int
            Place of the line in the bench, from 0.
        """
        line = self.fit.lines[number]
        if not is_driven(line):
            return []
        said = [reason for reason in line.distrust_reasons if OWN_GAPS not in reason]
        if not is_noise_known(line):
            said.append("the noise beside it could not be told")
        return [f"{self.name}: {reason}" for reason in said]
