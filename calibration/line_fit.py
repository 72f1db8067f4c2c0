"""What a line fit found: each line, the clock, and how much of the recording was used."""

from dataclasses import dataclass, field
from typing import TYPE_CHECKING, Any

import numpy as np
from numpy.typing import NDArray

from calibration.phasor_estimate import PhasorEstimate
from metro.notebook import NotebookPage, maybe_figure

if TYPE_CHECKING:
    from collections.abc import Iterable, Sequence

    from calibration.line_course import LineBeside, LineCourse
    from calibration.line_product import LineProduct
    from metro.measured import Measured
    from metro.units import Quantity

__all__ = ["Line", "LineFit"]


@dataclass(frozen=True, slots=True)
class Line:
    """One line, A·cos(2πft + φ) with t = 0 at the recording's first sample.

    Parameters
    ----------
    frequency_hz, frequency_u_hz : float
        Frequency as fitted or given, and its standard uncertainty (0 where given).
    response : PhasorEstimate
        The line in the samples.
    density_value : float
        Amplitude spectral density of the noise beside the line, unit of the samples/√Hz.
    used_s : float
        Time really used [s].
    floor_value : float
        √(S/T), or what rounding leaves where that is more, in the unit of the samples: a line is
        told from nothing by its amplitude over it.
    drive : PhasorEstimate, optional
        The line in the drive channel.
    ratio : PhasorEstimate, optional
        Response over drive.
    distrust_reasons : tuple of str
        Why not to believe it; empty where no reason was found.
    is_phase_refused : bool
        True where the samples have no time of their own, so that only the ratio has a phase.
    course : LineCourse, optional
        Amplitude and phase through the recording; None where it is too short for two bins.
    beside : LineBeside, optional
        What the fit left over beside the line.
    """

    frequency_hz: float
    frequency_u_hz: float
    response: PhasorEstimate
    density_value: float
    used_s: float
    floor_value: float
    drive: PhasorEstimate | None = None
    ratio: PhasorEstimate | None = None
    distrust_reasons: tuple[str, ...] = ()
    is_phase_refused: bool = False
    course: "LineCourse | None" = field(default=None, repr=False)
    beside: "LineBeside | None" = field(default=None, repr=False)

    @property
    def is_trustworthy(self) -> bool:
        """True where no reason for distrust was found."""
        return not self.distrust_reasons

    @property
    def frequency(self) -> "Measured":
        """Frequency, in the time of the recording's own clock."""
        from metro.measured import Measured

        return Measured.of(self.frequency_hz, "Hz", self.frequency_u_hz, self.dof)

    @property
    def amplitude(self) -> "Measured":
        """Amplitude, zero to peak."""
        return self.response.amplitude

    @property
    def phase(self) -> "Measured":
        """Phase [rad] at t = 0."""
        return self.response.phase

    @property
    def noise_density(self) -> "Measured":
        """One-sided amplitude spectral density of the noise beside the line."""
        from metro.measured import Measured

        # A power known to a relative √(2/dof) is an amplitude known to half of that.
        u = self.density_value / np.sqrt(2 * self.dof)
        return Measured.of(self.density_value, density_unit(self.response.unit), float(u), self.dof)

    @property
    def snr(self) -> "Measured":
        """A/√(S/T)."""
        from metro.measured import Measured

        # The noise is known to 1/√(2·dof) of itself, the amplitude to 1/snr.
        value = self.snr_value
        u = float(np.hypot(value / np.sqrt(2 * self.dof), 1.0))
        return Measured.of(value, "1", u, self.dof)

    @property
    def snr_value(self) -> float:
        """A/√(S/T), by `floor_value`, as a plain number; infinite where nothing but the line is."""
        floor = self.floor_value
        if floor > 0:
            return float(abs(self.phasor) / floor)
        return float("inf") if abs(self.phasor) > 0 else 0.0

    def to_dict(self, *, over_time: bool = False) -> dict[str, Any]:
        """Return the line as the JSON output has it, quantities as Measured."""
        drive, ratio = self.drive, self.ratio
        is_known = not self.is_phase_refused
        return {
            "frequency": self.frequency,
            "amplitude": self.amplitude,
            "phase": self.phase if is_known else None,
            "noise_density": self.noise_density,
            "snr": self.snr,
            "drive": drive
            and {"amplitude": drive.amplitude, "phase": drive.phase if is_known else None},
            "ratio": ratio and {"magnitude": ratio.magnitude, "phase": ratio.phase},
            "trustworthy": self.is_trustworthy,
            "reasons": list(self.distrust_reasons),
            **({"course": self.course and self.course.to_dict()} if over_time else {}),
        }

    @property
    def phasor(self) -> complex:
        """A·e^(iφ), in the unit of the samples."""
        return self.response.phasor

    @property
    def phasor_covariance(self) -> NDArray[np.float64]:
        """Covariance of real and imaginary part, shape (2, 2)."""
        return self.response.covariance

    @property
    def dof(self) -> float:
        """Degrees of freedom of the covariance."""
        return self.response.dof

    @property
    def ratio_phasor(self) -> complex | None:
        """Response over drive, None without a drive."""
        return None if self.ratio is None else self.ratio.phasor

    @property
    def ratio_covariance(self) -> NDArray[np.float64] | None:
        """Covariance of the ratio's real and imaginary part, shape (2, 2)."""
        return None if self.ratio is None else self.ratio.covariance

    @property
    def drive_phasor(self) -> complex | None:
        """A·e^(iφ) of the drive, None without a drive."""
        return None if self.drive is None else self.drive.phasor


@dataclass(frozen=True, slots=True)
class LineFit(NotebookPage):
    """All lines of one fit.

    Parameters
    ----------
    lines : tuple of Line
        In the order the frequencies were given.
    clock_value, clock_u, clock_dof : float
        Common relative error of all line frequencies, averaged over the recording: the lines stand
        at f·(1 + offset) of the recording's clock. NaN where it cannot be known.
    clock_applied : bool
        True where the lines were followed at the offset found; False where it is too small to tell
        from zero and the frequencies were taken as given.
    used_fraction : float
        Share of the recording's samples that were used.
    duration_s : float
        Length of the recording [s], gaps included.
    remarks : tuple of str
        What was done that a reader should know.
    notes : tuple of str
        How it was done, for those who want to know.
    gaps : tuple of int
        Lengths of the gaps [samples], in order, where the recording knows them.
    clock_drift_per_s : tuple of float, optional
        Change of the offset in a second, and its standard uncertainty [1/s].
    products : tuple of LineProduct
        Harmonics and intermodulation, where they were asked for.
    """

    lines: tuple[Line, ...]
    clock_value: float
    clock_u: float
    clock_dof: float
    clock_applied: bool
    used_fraction: float
    duration_s: float
    remarks: tuple[str, ...] = field(default=())
    notes: tuple[str, ...] = ()
    gaps: tuple[int, ...] = ()
    clock_drift_per_s: tuple[float, float] | None = None
    products: "tuple[LineProduct, ...]" = ()

    @property
    def clock_offset(self) -> "Measured | None":
        """Relative frequency error of all lines, None where it cannot be known."""
        from metro.measured import Measured

        if not np.isfinite(self.clock_value):
            return None
        return Measured.of(self.clock_value, "1", self.clock_u, self.clock_dof)

    @property
    def clock_drift(self) -> "Measured | None":
        """Change of the clock offset in a second [1/s], None where it cannot be known."""
        from metro.measured import Measured

        if self.clock_drift_per_s is None:
            return None
        value, u = self.clock_drift_per_s
        return Measured.of(value, "1/s", u, self.clock_dof)

    @property
    def duration(self) -> "Quantity":
        """Length of the recording, gaps included."""
        from metro.units import quantity

        return quantity(self.duration_s, "s")

    @property
    def is_trustworthy(self) -> bool:
        """True where no line has a reason for distrust."""
        return all(line.is_trustworthy for line in self.lines)

    @property
    def distrust_reasons(self) -> tuple[str, ...]:
        """All reasons, each once."""
        return tuple(dict.fromkeys(r for line in self.lines for r in line.distrust_reasons))

    def to_numpy(self) -> NDArray[np.void]:
        """Return the lines as one structured array.

        Returns
        -------
        ndarray, shape (n_lines,)
            Fields frequency [Hz], amplitude and u_amplitude (unit of the samples), phase and u_phase
            [rad], noise_density (unit/√Hz), snr, trustworthy.
        """
        rows = [
            (
                line.frequency_hz,
                line.amplitude.magnitude,
                line.amplitude.u_magnitude,
                line.phase.magnitude,
                line.phase.u_magnitude,
                line.noise_density.magnitude,
                line.snr_value,
                line.is_trustworthy,
            )
            for line in self.lines
        ]
        names = [
            "frequency",
            "amplitude",
            "u_amplitude",
            "phase",
            "u_phase",
            "noise_density",
            "snr",
        ]
        return np.array(rows, dtype=[*((name, float) for name in names), ("trustworthy", bool)])

    def notebook_tables(self) -> "list[tuple[Sequence[str], Iterable[Sequence[Any]]]]":
        """Return the lines as a table, and what is common to them as another."""
        lines = [
            (
                f"{line.frequency_hz:.9g} Hz",
                line.amplitude,
                line.phase,
                f"{line.snr_value:.4g}",
                "; ".join(line.distrust_reasons) or "no reason for distrust found",
            )
            for line in self.lines
        ]
        common = [
            ("clock offset of the lines", self.clock_offset),
            ("used", f"{100 * self.used_fraction:.4g} % of {self.duration_s:.6g} s"),
            ("convention", "A·cos(2πft + φ), t = 0 at the first sample of the recording"),
        ]
        return [(("line", "amplitude", "phase", "A/√(S/T)", "trust"), lines), ((), common)]

    def notebook_figure(self) -> Any:  # noqa: ANN401  # matplotlib's Figure or None
        """Return the noise beside each line and its course."""
        from calibration.line_plot import lines_figure

        return maybe_figure(lambda: lines_figure(self, "lines"))

    def reasons_by_line(self) -> list[str]:
        """Return all reasons, each with the lines it is about."""
        about: dict[str, list[str]] = {}
        for line in self.lines:
            for reason in line.distrust_reasons:
                about.setdefault(reason, []).append(f"{line.frequency_hz:.9g} Hz")
        return [f"{', '.join(lines)}: {reason}" for reason, lines in about.items()]

    def to_dict(self, *, over_time: bool = False) -> dict[str, Any]:
        """Return the fit as the JSON output has it, the courses of the lines on request."""
        return {
            "lines": [line.to_dict(over_time=over_time) for line in self.lines],
            "clock_offset": self.clock_offset,
            "clock_drift": self.clock_drift,
            "used_fraction": self.used_fraction,
            "gaps": {"number": len(self.gaps), "samples": sum(self.gaps)},
            "duration": self.duration,
            **({"products": [p.to_dict() for p in self.products]} if self.products else {}),
            "remarks": [*self.remarks, *self.notes],
        }


def density_unit(unit: str) -> str:
    """Return the unit of an amplitude spectral density.

    Parameters
    ----------
    unit : str
        Unit of the samples, "1" for none.

    Returns
    -------
    str
        ``V/Hz**0.5`` for ``V``, ``1/Hz**0.5`` for ``1``.
    """
    return f"{unit}/Hz**0.5"
