"""A recording run backwards through a calibration: volts to phase, displacement or strain.

Every sample is inverted on a named slope of the fringe with the calibration's extremes; gaps stay
gaps. The uncertainty comes as a systematic part, common to all samples, and a random one.
"""

from collections.abc import Sequence
from dataclasses import dataclass
from math import hypot, sqrt

import numpy as np
from numpy.typing import NDArray

from calibration.errors import CalibrationError
from calibration.extremes import Extremes
from calibration.record import Calibration
from calibration.term import ADC_REFERENCE, FRINGE_EXTREMES, POWER_DRIFT, RULER
from calibration.working_point import edge_reasons, invert_fringe
from firmware_bridge.trace import Channel, Recording, Span
from metro.kernel.phase import phase_per_metre

__all__ = ["QUANTITIES", "Conversion", "ConvertedRecording", "per_radian"]

FloatArray = NDArray[np.float64]

QUANTITIES = {"displacement": "m", "strain": "1", "phase": "rad"}


@dataclass(frozen=True, eq=False)
class Conversion:
    """What a recording in other units is worth.

    Parameters
    ----------
    quantity, unit : str
        ``"displacement"`` [m], ``"strain"`` [1] or ``"phase"`` [rad].
    scale_u : float
        Relative standard uncertainty of the scale that every conversion with this calibration has.
    drift_u : float
        Relative standard uncertainty from this recording's own power drift.
    noise : float
        Random part: rms of the noise from sample to sample, in ``unit``.
    used_fraction : float
        Part of the samples that could be converted.
    reasons, cautions : list of str
        Why it must not be trusted; what a user should know.
    """

    quantity: str
    unit: str
    scale_u: float
    drift_u: float
    noise: float
    used_fraction: float
    reasons: list[str]
    cautions: list[str]

    @property
    def relative_u(self) -> float:
        """Systematic part: relative standard uncertainty common to all samples of the recording."""
        return hypot(self.scale_u, self.drift_u)


class ConvertedRecording(Recording):
    """A recording in other units, converted block by block as it is read.

    Parameters
    ----------
    source : Recording
        The recording; its channel is in the unit of the calibration's extremes.
    channel : str
        Name of the photodiode's channel, as `Recording.find` takes it.
    calibration : Calibration
        Extremes, wavelength, index, and for strain the arm length.
    quantity : str
        ``"displacement"``, ``"strain"`` or ``"phase"``.
    slope : str
        On which side of the fringe the recording lies: ``"rising"`` or ``"falling"``.

    Raises
    ------
    CalibrationError
        If the quantity or slope has another name, or strain is asked for without an arm length.
    """

    def __init__(
        self,
        source: Recording,
        channel: str,
        calibration: Calibration,
        quantity: str = "displacement",
        slope: str = "rising",
    ) -> None:
        if quantity not in QUANTITIES:
            names = ", ".join(QUANTITIES)
            raise CalibrationError(f"quantity must be one of {names}, got {quantity!r}")
        self.quantity, self.slope, self.calibration = quantity, slope, calibration
        self._source, self._position = source, source.find(channel)
        self._per_radian = per_radian(calibration, quantity)
        super().__init__(
            path=source.path,
            format=source.format,
            rate_hz=source.rate_hz,
            channels=[Channel(quantity, QUANTITIES[quantity])],
            length=source.length,
            rate_u_hz=source.rate_u_hz,
            gaps=source.gaps,
            over_range=source.over_range,
            remarks=source.remarks,
            start_unix_s=source.start_unix_s,
        )

    def read(self, channels: Sequence[int], start: int, stop: int) -> Span:
        """Return converted samples; see `Recording.read`."""
        span = self._source.read([self._position], start, stop)
        phase_rad = invert_fringe(span.values[:, 0], self.calibration.extremes, self.slope)
        values = phase_rad.phase_rad * self._per_radian
        return Span(np.repeat(values[:, None], len(channels), axis=1), span.over_range)

    def judge(self, from_s: float | None = None, to_s: float | None = None) -> Conversion:
        """Return what the conversion is worth, from one pass over the recording or a stretch of it.

        Parameters
        ----------
        from_s, to_s : float, optional
            The stretch [s], as for `trace`.

        Returns
        -------
        Conversion
            Uncertainty, share converted, reasons and cautions.
        """
        start, stop = self.span(from_s, to_s)
        tally = _Tally()
        for first in range(start, stop, _BLOCK):
            span = self._source.read([self._position], first, min(first + _BLOCK, stop))
            tally.add(span.values[:, 0], self.calibration.extremes, self.slope)
        noise_rad = sqrt(tally.square / tally.differences) if tally.differences else float("nan")
        reasons = edge_reasons(1.0 - tally.kept / tally.present) if tally.present else [_EMPTY]
        scale_u, drift_u = _relative_us(self.calibration, self.quantity, tally)
        return Conversion(
            quantity=self.quantity,
            unit=QUANTITIES[self.quantity],
            scale_u=scale_u,
            drift_u=drift_u,
            noise=noise_rad * abs(self._per_radian),
            used_fraction=tally.converted / (stop - start),
            reasons=[*reasons, *self.calibration.reasons],
            cautions=_cautions(self.calibration, self.slope),
        )


_BLOCK = 1 << 18
_EMPTY = "the recording holds no sample"


@dataclass
class _Tally:
    """Counts over the blocks of a recording."""

    present: int = 0
    kept: int = 0
    converted: int = 0
    differences: int = 0
    square: float = 0.0
    inverse_sin2: float = 0.0
    cos_over_sin2: float = 0.0

    def add(self, volts: FloatArray, extremes: Extremes, slope: str) -> None:
        phase = invert_fringe(volts, extremes, slope)
        self.present += phase.present
        self.kept += phase.kept
        self.converted += int(np.count_nonzero(np.isfinite(phase.phase_rad)))
        self.inverse_sin2 += phase.kept * phase.means.inverse_sin2
        self.cos_over_sin2 += phase.kept * phase.means.cos_over_sin2
        # fourth differences leave motion and lines well below half the rate alone; white noise of
        # rms σ gives them (1 + 16 + 36 + 16 + 1)σ² = 70σ²
        fourth = np.diff(phase.phase_rad, 4)
        fourth = fourth[np.isfinite(fourth)]
        self.differences += fourth.size
        self.square += float(np.sum(fourth**2)) / 70.0


def per_radian(calibration: Calibration, quantity: str) -> float:
    """Return how much of a quantity one radian of optical phase is.

    Parameters
    ----------
    calibration : Calibration
        Its chain: wavelength, index, and for strain the arm length.
    quantity : str
        ``"displacement"`` [m], ``"strain"`` [1] or ``"phase"`` [rad].

    Returns
    -------
    float
        In the quantity's unit a radian.

    Raises
    ------
    CalibrationError
        If strain is asked for without an arm length.
    """
    if quantity == "phase":
        return 1.0
    chain = calibration.chain
    round_trips = chain.get("round_trips")
    per_metre = phase_per_metre(
        float(chain["wavelength"].magnitude),
        float(chain["index"].magnitude),
        1.0 if round_trips is None else float(round_trips.magnitude),
    )
    if quantity == "displacement":
        return 1.0 / per_metre
    if "arm_length" not in chain:
        raise CalibrationError("strain needs the arm length (arms.length in the bench), got none")
    return 1.0 / per_metre / float(chain["arm_length"].magnitude)


def _relative_us(calibration: Calibration, quantity: str, tally: _Tally) -> tuple[float, float]:
    """Return the scale's relative u and that of the recording's own drift, at its working points."""
    extremes, slope = calibration.extremes, float(calibration.readout_slope.magnitude)
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


def _cautions(calibration: Calibration, slope: str) -> list[str]:
    cautions = [f"the recording is taken to lie on the {slope} slope"]
    for name in ("amplifier corner", "antialias corner"):
        corner = calibration.chain.get(name.replace(" ", "_"))
        if corner is None:
            continue
        cautions.append(
            f"the {name} at {float(corner.magnitude):g} Hz is not undone: fast motion reads small"
        )
    return [*cautions, *calibration.cautions]
