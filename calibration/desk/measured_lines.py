"""Lines of a stretch of samples as the ledger keeps them: in metres where a calibration is in force."""

from dataclasses import dataclass, replace
from typing import TYPE_CHECKING, Any

import numpy as np
from numpy.typing import NDArray

from calibration.channel_volts import volts_of
from calibration.convert import per_radian
from calibration.desk.ledger_errors import LedgerError
from calibration.desk.line_entry import LineEntry
from calibration.errors import CalibrationError
from calibration.lines import fit_lines_si
from calibration.working_point import invert_fringe

if TYPE_CHECKING:
    from calibration.line_fit import LineFit
    from calibration.record import Calibration
    from firmware_bridge.trace import Recording

__all__ = ["InVolts", "Measuring", "entries_of_recording"]

FloatArray = NDArray[np.float64]

_OVER_RANGE = 1e-4  # of the samples: what is cut off there would have been the largest


@dataclass(frozen=True, eq=False)
class InVolts:
    """Samples of a channel, shape (n,), their unit, and what was taken for granted."""

    values: FloatArray
    unit: str
    cautions: tuple[str, ...] = ()


@dataclass(frozen=True)
class Measuring:
    """How lines are measured.

    Parameters
    ----------
    lines_hz : tuple of float
        The lines [Hz].
    calibration : Calibration or None
        Whose extremes turn the photodiode's volts into metres; without it ratios are volts per volt,
        which the working point moves.
    slope : str
        On which side of the fringe: ``"rising"`` or ``"falling"``.
    mains_hz : float
        Frequency of the mains [Hz].
    """

    lines_hz: tuple[float, ...]
    calibration: "Calibration | None" = None
    slope: str = "rising"
    mains_hz: float = 50.0

    def in_volts(self, name: str, unit: str, values: FloatArray) -> "InVolts":
        """Return a channel as the calibration wants it; as it is where there is no calibration.

        Parameters
        ----------
        name, unit : str
            Of the channel.
        values : ndarray, shape (n,)
            Its samples, NaN where missing.

        Returns
        -------
        InVolts
            Samples, their unit, and what was taken for granted.

        Raises
        ------
        CalibrationError
            If there is a calibration and the channel has another unit.
        """
        if self.calibration is None:
            return InVolts(values, unit)
        found = volts_of(name, unit, values, self.calibration)
        return InVolts(found.of(values), "V", (found.caution,) if found.caution else ())

    def fit(
        self,
        volts: FloatArray,
        drive: FloatArray | None,
        rate_hz: float,
        *,
        unit: str = "V",
        drive_unit: str = "V",
        over_range: int = 0,
    ) -> "LineFit":
        """Return the lines in a stretch of samples.

        Parameters
        ----------
        volts, drive : ndarray, shape (n,)
            Photodiode and, where it is read, the drive, from `in_volts`; NaN where missing.
        rate_hz : float
            Samples per second.
        unit, drive_unit : str
            Of the two channels, from `in_volts`.
        over_range : int
            How many of the NaN were over range.

        Returns
        -------
        LineFit
            Distrusted where the working point wandered or the converter clipped.

        Raises
        ------
        CalibrationError
            If a line cannot be fitted at this rate or in so few samples.
        """
        reasons = []
        if self.calibration is not None:
            phase = invert_fringe(volts, self.calibration.extremes, self.slope)
            reasons = list(phase.distrust_reasons)
            volts, unit = phase.phase_rad * per_radian(self.calibration, "displacement"), "m"
            if not np.isfinite(volts).any():
                raise LedgerError("no sample of the stretch lies between the fringe's extremes")
        fit = fit_lines_si(
            volts,
            rate_hz,
            self.lines_hz,
            drive,
            mains_hz=self.mains_hz,
            value_unit=unit,
            drive_unit=drive_unit,
        )
        if over_range > _OVER_RANGE * len(volts):
            reasons.append(f"clipped: {over_range} samples were over range")
        if not reasons:
            return fit
        lines = (
            replace(line, distrust_reasons=(*line.distrust_reasons, *reasons)) for line in fit.lines
        )
        return replace(fit, lines=tuple(lines))


def entries_of_recording(
    recording: "Recording",
    photodiode: str,
    drive: str | None,
    measuring: Measuring,
    *,
    unix_s: float,
    **more: Any,  # noqa: ANN401  # fields of the entry
) -> list[LineEntry]:
    """Return the lines of a whole recording.

    Parameters
    ----------
    recording : Recording
        Opened.
    photodiode, drive : str
        Channels, as `Recording.find` takes them.
    measuring : Measuring
        How lines are measured.
    unix_s : float
        UTC of the middle of the recording, seconds since 1970.
    **more : object
        Further fields of the entries.

    Returns
    -------
    list of LineEntry
        One a line.

    Raises
    ------
    CalibrationError
        If a line cannot be fitted.
    BridgeError
        If the recording cannot be read.
    """
    response = recording.trace(photodiode)
    read = None if drive is None else recording.trace(drive)
    try:
        light = measuring.in_volts(response.name, response.unit, response.values)
        driven = None if read is None else measuring.in_volts(read.name, read.unit, read.values)
    except CalibrationError as error:
        raise LedgerError(f"{recording.path}: {error}") from None
    fit = measuring.fit(
        light.values,
        None if driven is None else driven.values,
        recording.rate_hz,
        unit=light.unit,
        drive_unit="V" if driven is None else driven.unit,
        over_range=response.over_range,
    )
    return [
        LineEntry.of_line(
            line,
            unix_s=unix_s,
            duration_s=fit.duration_s,
            source=recording.path,
            cautions=(*light.cautions, *(() if driven is None else driven.cautions)),
            **more,
        )
        for line in fit.lines
    ]
