"""The fringe fit: what a driven fringe gave, with uncertainties and reasons for distrust."""

from dataclasses import dataclass, field
from typing import TYPE_CHECKING, Any

import numpy as np
from numpy.typing import NDArray

from metro.measured import Measured
from metro.notebook import NotebookPage
from metro.output import plain

if TYPE_CHECKING:
    from collections.abc import Iterable, Sequence

__all__ = ["FringeFit"]


@dataclass(frozen=True)
class FringeFit(NotebookPage):
    """Extremes, working point and depth of each line.

    One photodiode cannot tell (φ, x) from (−φ, −x): the sign is chosen so that the working phase lies
    between 0 and π (falling slope). Seen from the rising slope all phases change sign.

    Attributes
    ----------
    low, high : Measured
        Extremes of the fringe, in the record's unit.
    contrast : Measured or None
        (high − low)/(high + low − 2·dark); None without a dark level.
    slope : Measured
        dV/dφ at the first sample used, record's unit per radian.
    slope_per_metre : Measured or None
        dV/dx there, record's unit per metre; None without a wavelength.
    working_phase : Measured
        φ at the first sample used [rad], 0 at the detector's maximum, between 0 and π.
    working_range_rad : tuple of float
        Least and greatest φ over the record [rad].
    working_spread_rad : float
        Standard deviation of φ over the record [rad].
    phase_amplitude : list of Measured
        Depth of each line, zero to peak [rad], in the order given.
    phase : list of Measured
        Phase of each line at t = 0, the recording's first sample [rad].
    displacement_amplitude : list of Measured or None
        Depth of each line in metres; None without a wavelength.
    clock_offset : Measured or None
        Relative error of the record's clock against the lines', where the record shows one.
    residual_rms : float
        Root mean square of the residuals, in the record's unit.
    used_samples : int
        Samples fitted.
    value_unit : str
        The record's unit.
    reasons : list of str
        Why the fit must not be trusted; empty where nothing was found.
    working_course_rad : ndarray, shape (k,)
        φ without the lines at k moments, evenly from the first sample used to the last [rad].
    """

    low: Measured
    high: Measured
    contrast: Measured | None
    slope: Measured
    slope_per_metre: Measured | None
    working_phase: Measured
    working_range_rad: tuple[float, float]
    working_spread_rad: float
    phase_amplitude: list[Measured]
    phase: list[Measured]
    displacement_amplitude: list[Measured] | None
    clock_offset: Measured | None
    residual_rms: float
    used_samples: int
    value_unit: str
    reasons: list[str] = field(default_factory=list)
    working_course_rad: NDArray[np.float64] = field(
        default_factory=lambda: np.zeros(1), compare=False, repr=False
    )

    @property
    def is_trustworthy(self) -> bool:
        """Whether no reason for distrust was found.

        Returns
        -------
        bool
            False where there are reasons.
        """
        return not self.reasons

    @property
    def distrust_reasons(self) -> list[str]:
        """The reasons, as line fits name them.

        Returns
        -------
        list of str
            Same as ``reasons``.
        """
        return self.reasons

    def to_dict(self) -> dict[str, Any]:
        """Return the measured values and the verdict as plain JSON values."""
        values = {
            name: getattr(self, name)
            for name in (
                "low", "high", "contrast", "slope", "slope_per_metre", "working_phase",
                "phase_amplitude", "phase", "displacement_amplitude", "clock_offset",
            )
        }  # fmt: skip
        verdict = {"trustworthy": self.is_trustworthy, "reasons": self.reasons}
        return dict(plain({**values, **verdict}))

    def notebook_tables(self) -> "list[tuple[Sequence[str], Iterable[Sequence[Any]]]]":
        """Return the fringe, and the depth of each line."""
        fringe = [
            ("low", self.low),
            ("high", self.high),
            ("contrast", self.contrast),
            ("working phase", self.working_phase),
            ("slope", self.slope),
            ("slope per metre", self.slope_per_metre),
            ("trust", "; ".join(self.reasons) or "no reason for distrust found"),
        ]
        unknown: list[Measured | None] = [None] * len(self.phase_amplitude)
        metres = self.displacement_amplitude or unknown
        lines = list(
            zip(range(1, len(metres) + 1), self.phase_amplitude, self.phase, metres, strict=True)
        )
        header = ("line", "depth", "phase", "displacement")
        return [(("fringe", ""), fringe), (header, lines)]
