"""A recording run backwards through a calibration: volts to phase, displacement or strain.

Every sample is inverted on a named slope of the fringe with the calibration's extremes; gaps stay
gaps. The uncertainty comes as a systematic part, common to all samples, and a random one.
"""

from collections.abc import Sequence
from dataclasses import dataclass
from math import sqrt

import numpy as np
from numpy.typing import NDArray

from calibration.errors import CalibrationError
from calibration.extremes import Extremes
from calibration.record import Calibration
from calibration.working_point import edge_reasons, invert_fringe
from firmware_bridge.trace import Channel, Recording, Span
from metro.kernel.phase import phase_per_metre

__all__ = ["QUANTITIES", "Conversion", "ConvertedRecording"]

FloatArray = NDArray[np.float64]

QUANTITIES = {"displacement": "m", "strain": "1", "phase": "rad"}
# Rows of the readout's budget that do not enter a conversion: volts as read are divided by extremes
# as read, so that the converter's scale cancels.
_CANCELS = ("ADC reference",)
_RULER = ("wavelength", "refractive index")


@dataclass(frozen=True, eq=False)
class Conversion:
    """What a recording in other units is worth.

    Parameters
    ----------
    quantity, unit : str
        ``"displacement"`` [m], ``"strain"`` [1] or ``"phase"`` [rad].
    relative_u : float
        Systematic part: relative standard uncertainty of the scale, common to all samples.
    noise : float
        Random part: rms of the noise from sample to sample, in ``unit``.
    used_fraction : float
        Part of the samples that could be converted.
    reasons, cautions : list of str
        Why it must not be trusted; what a user should know.
    """

    quantity: str
    unit: str
    relative_u: float
    noise: float
    used_fraction: float
    reasons: list[str]
    cautions: list[str]


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
        self._per_radian = _per_radian(calibration, quantity)
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

    def judge(self) -> Conversion:
        """Return what the conversion is worth, from one pass over the recording."""
        tally = _Tally()
        for first in range(0, self.length, _BLOCK):
            span = self._source.read([self._position], first, min(first + _BLOCK, self.length))
            tally.add(span.values[:, 0], self.calibration.extremes, self.slope)
        noise_rad = sqrt(tally.square / tally.pairs) if tally.pairs else float("nan")
        reasons = edge_reasons(1.0 - tally.kept / tally.present) if tally.present else [_EMPTY]
        return Conversion(
            quantity=self.quantity,
            unit=QUANTITIES[self.quantity],
            relative_u=_relative_u(self.calibration, self.quantity),
            noise=noise_rad * abs(self._per_radian),
            used_fraction=tally.converted / self.length,
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
    pairs: int = 0
    square: float = 0.0

    def add(self, volts: FloatArray, extremes: Extremes, slope: str) -> None:
        phase = invert_fringe(volts, extremes, slope)
        self.present += phase.present
        self.kept += phase.kept
        self.converted += int(np.count_nonzero(np.isfinite(phase.phase_rad)))
        # second differences leave slow motion alone; white noise of rms σ gives them 6σ²
        second = np.diff(phase.phase_rad, 2)
        second = second[np.isfinite(second)]
        self.pairs += second.size
        self.square += float(np.sum(second**2)) / 6.0


def _per_radian(calibration: Calibration, quantity: str) -> float:
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


def _relative_u(calibration: Calibration, quantity: str) -> float:
    """Return the scale's relative standard uncertainty, from the readout's budget."""
    budget, slope = calibration.readout_budget, float(calibration.readout_slope.magnitude)
    left_out = (*_CANCELS, *_RULER) if quantity == "phase" else _CANCELS
    effects = [c.effect / slope for c in budget.contributions if c.name not in left_out]
    if quantity == "strain":
        arm = calibration.chain["arm_length"]
        effects.append(float(arm.u_magnitude or 0.0) / float(arm.magnitude))
    # the recording has a power drift of its own, as large as that between the scans
    effects += [
        c.effect / slope * sqrt(max(1, calibration.extremes.scans))
        for c in budget.contributions
        if c.name.startswith("power drift")
    ]
    return sqrt(sum(effect**2 for effect in effects))


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
