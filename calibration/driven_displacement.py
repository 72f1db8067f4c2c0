"""What the actuator moves: a recorded drive through the response between the calibrated lines."""

from collections.abc import Sequence

import numpy as np

from calibration.channel_volts import channel_volts
from calibration.conversion_filter import UNREACHED, actuator_stage
from calibration.conversion_tally import ConversionTally
from calibration.convert import Conversion
from calibration.derived_recording import DerivedRecording
from calibration.record import Calibration
from firmware_bridge.channel import Channel
from firmware_bridge.span import Span
from firmware_bridge.trace import Recording

__all__ = ["DrivenDisplacement"]

_BLOCK = 1 << 18


class DrivenDisplacement(DerivedRecording):
    """What the actuator moves, from the recorded drive through the response between the lines.

    Parameters
    ----------
    source : Recording
        With the drive's channel in volts.
    channel : str
        Its name, as `Recording.find` takes it.
    calibration : Calibration
        With the actuator's response.

    Raises
    ------
    CalibrationError
        If the channel is not in volts, or the calibration keeps no response.
    """

    def __init__(self, source: Recording, channel: str, calibration: Calibration) -> None:
        self._position = source.find(channel)
        self._volts = channel_volts(source, self._position, calibration)
        self._calibration = calibration
        self.stage = actuator_stage(calibration, source.rate_hz)
        super().__init__(source, [Channel("displacement", "m")])

    def read(self, channels: Sequence[int], start: int, stop: int) -> Span:
        """Return displacements [m]; see `Recording.read`."""
        reach = self.stage.filter.reach
        first, last = max(0, start - reach), min(self.length, stop + reach)
        span = self._source.read([self._position], first, last)
        around = (reach - (start - first), reach - (last - stop))
        values = np.pad(self._volts.of(span.values[:, 0]), around, constant_values=np.nan)
        out = self.stage.filter.apply(values)
        return Span(np.repeat(out[:, None], len(channels), axis=1), span.over_range)

    def judge(self, from_s: float | None = None, to_s: float | None = None) -> Conversion:
        """Return what the conversion is worth, from one pass over the recording or a stretch of it.

        Parameters
        ----------
        from_s, to_s : float, optional
            The stretch [s], as for `trace`.

        Returns
        -------
        Conversion
            The response's uncertainty is the systematic part.
        """
        start, stop = self.span(from_s, to_s)
        tally = ConversionTally()
        for first in range(start, stop, _BLOCK):
            tally.count_filtered(self.read([0], first, min(first + _BLOCK, stop)).values[:, 0])
        return Conversion(
            quantity="displacement",
            unit="m",
            scale_u=self.stage.relative_u,
            drift_u=0.0,
            noise=tally.noise(1.0),
            used_fraction=tally.used / (stop - start),
            reasons=[] if tally.used else [UNREACHED],
            cautions=[
                *([self._volts.caution] if self._volts.caution else []),
                self.stage.text,
                *self._calibration.cautions,
            ],
        )
