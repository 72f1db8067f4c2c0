"""A recording run backwards through a calibration: volts to phase, displacement or strain.

Every sample is inverted on a named slope of the fringe with the calibration's extremes; gaps stay
gaps. Filters may undo what the readout or a servo does against frequency. The uncertainty comes as a
systematic part, common to all samples, and a random one. All is done block by block, as it is read.
"""

from collections.abc import Sequence
from dataclasses import dataclass
from math import hypot

import numpy as np
from numpy.typing import NDArray

from calibration.channel_volts import channel_volts
from calibration.conversion_filter import UNREACHED, FilterStage
from calibration.conversion_tally import ConversionTally, relative_us
from calibration.derived_recording import DerivedRecording
from calibration.errors import CalibrationError
from calibration.kept_readout import CORNERS
from calibration.record import Calibration
from calibration.working_point import edge_reasons, invert_fringe
from firmware_bridge.channel import Channel
from firmware_bridge.span import Span
from firmware_bridge.trace import Recording
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


class ConvertedRecording(DerivedRecording):
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
    stages : sequence of FilterStage
        Applied to the converted samples, one after the other.

    Raises
    ------
    CalibrationError
        If the quantity or slope has another name, the channel is not in volts, or strain is asked
        for without an arm length.
    """

    def __init__(
        self,
        source: Recording,
        channel: str,
        calibration: Calibration,
        quantity: str = "displacement",
        slope: str = "rising",
        stages: Sequence[FilterStage] = (),
    ) -> None:
        self.quantity, self.slope, self.calibration = quantity, slope, calibration
        self.stages = tuple(stages)
        self._reach = sum(stage.filter.reach for stage in self.stages)
        self._position = source.find(channel)
        self._per_radian = per_radian(calibration, quantity)
        self._volts = channel_volts(source, self._position, calibration)
        super().__init__(source, [Channel(quantity, QUANTITIES[quantity])])

    def read(self, channels: Sequence[int], start: int, stop: int) -> Span:
        """Return converted samples; see `Recording.read`."""
        first, last = max(0, start - self._reach), min(self.length, stop + self._reach)
        span = self._source.read([self._position], first, last)
        values = self._converted(span.values[:, 0])
        if self._reach:
            # beyond the ends nothing was recorded, and what a filter makes of it is not known
            before, after = self._reach - (start - first), self._reach - (last - stop)
            values = np.pad(values, (before, after), constant_values=np.nan)
            for stage in self.stages:
                values = stage.filter.apply(values)
            over_range = self._source.read([self._position], start, stop).over_range
        else:
            over_range = span.over_range
        return Span(np.repeat(values[:, None], len(channels), axis=1), over_range)

    def _converted(self, values: FloatArray) -> FloatArray:
        """Return samples of the source in the quantity's unit, shape (n,), before any filter."""
        volts = self._volts.of(values)
        phase = invert_fringe(volts, self.calibration.extremes, self.slope)
        return np.asarray(phase.phase_rad * self._per_radian)

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
        tally = ConversionTally()
        for first in range(start, stop, _BLOCK):
            span = self._source.read([self._position], first, min(first + _BLOCK, stop))
            volts = self._volts.of(span.values[:, 0])
            tally.add(volts, self.calibration.extremes, self.slope)
            if self.stages:
                out = self.read([0], first, min(first + _BLOCK, stop)).values[:, 0]
                tally.count_filtered(out)
        noise = tally.noise(abs(self._per_radian))
        reasons = _reasons(tally)
        scale_u, drift_u = relative_us(self.calibration, self.quantity, tally)
        return Conversion(
            quantity=self.quantity,
            unit=QUANTITIES[self.quantity],
            scale_u=hypot(scale_u, *(stage.relative_u for stage in self.stages)),
            drift_u=drift_u,
            noise=noise,
            used_fraction=tally.used / (stop - start),
            reasons=[
                *reasons,
                *(reason for stage in self.stages for reason in stage.reasons),
                *self.calibration.reasons,
            ],
            cautions=[
                *([self._volts.caution] if self._volts.caution else []),
                *_cautions(self.calibration, self.slope, self.stages),
            ],
        )


_BLOCK = 1 << 18
_EMPTY = "the recording holds no sample"


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
        If the quantity has another name, or strain is asked for without an arm length.
    """
    if quantity not in QUANTITIES:
        names = ", ".join(QUANTITIES)
        raise CalibrationError(f"quantity must be one of {names}, got {quantity!r}")
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


def _reasons(tally: ConversionTally) -> list[str]:
    if not tally.present:
        return [_EMPTY]
    unreached = [] if tally.used or not tally.converted else [UNREACHED]
    return [*edge_reasons(1.0 - tally.kept / tally.present), *unreached]


def _cautions(calibration: Calibration, slope: str, stages: Sequence[FilterStage]) -> list[str]:
    cautions = [f"the recording is taken to lie on the {slope} slope"]
    cautions += [text for stage in stages for text in (stage.text, *stage.cautions)]
    undone = any(stage.undoes_readout for stage in stages)
    for name in () if undone else CORNERS:
        corner = calibration.chain.get(name)
        if corner is not None:
            cautions.append(
                f"the {name.replace('_', ' ')} at {float(corner.magnitude):g} Hz is not undone: fast "
                "motion reads small (--undo-readout)"
            )
    return [*cautions, *calibration.cautions]
