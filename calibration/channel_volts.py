"""What makes volts of a recording's channel, as the calibration's extremes are in volts."""

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from calibration.errors import CalibrationError
from calibration.record import Calibration
from firmware_bridge.trace import Recording
from metro.kernel.photodiode import step_v

__all__ = ["ChannelVolts", "channel_volts", "volts_of"]

_LOOKED_AT = 4096  # samples, to tell counts from volts


@dataclass(frozen=True)
class ChannelVolts:
    """Volts = values · ``scale`` + ``offset_v``.

    Parameters
    ----------
    scale : float
        Volts a unit of the channel.
    offset_v : float
        Volts at zero.
    caution : str
        What was taken for granted; empty where the channel says that it is in volts.
    """

    scale: float = 1.0
    offset_v: float = 0.0
    caution: str = ""

    def of(self, values: NDArray[np.float64]) -> NDArray[np.float64]:
        """Return values of the channel in volts."""
        if self.scale == 1.0 and self.offset_v == 0.0:
            return values
        return values * self.scale + self.offset_v


def channel_volts(recording: Recording, position: int, calibration: Calibration) -> ChannelVolts:
    """Return how a channel of a recording becomes volts.

    Parameters
    ----------
    recording : Recording
        The recording.
    position : int
        Of the channel.
    calibration : Calibration
        Keeps the converter's bits and range, where the bench gave them.

    Returns
    -------
    ChannelVolts
        As `volts_of` says.

    Raises
    ------
    CalibrationError
        If the channel has another unit.
    """
    channel = recording.channels[position]
    values = recording.read([position], 0, min(_LOOKED_AT, recording.length)).values[:, 0]
    try:
        return volts_of(channel.name, channel.unit, values, calibration)
    except CalibrationError as error:
        raise CalibrationError(f"{recording.path}: {error}") from None


def volts_of(
    name: str, unit: str, values: NDArray[np.float64], calibration: Calibration
) -> ChannelVolts:
    """Return how a channel becomes volts.

    Parameters
    ----------
    name, unit : str
        Of the channel.
    values : ndarray, shape (n,)
        Some of its samples, NaN where missing.
    calibration : Calibration
        Keeps the converter's bits and range, where the bench gave them.

    Returns
    -------
    ChannelVolts
        A channel without a unit is taken as counts where it holds whole numbers only and the
        converter is known, else as volts; its caution says which.

    Raises
    ------
    CalibrationError
        If the channel has another unit.
    """
    if unit == "V":
        return ChannelVolts()
    if unit != "1":
        raise CalibrationError(f"{name!r} must be in V, got {unit}")
    bits, range_v = calibration.chain.get("adc_bits"), calibration.chain.get("adc_range")
    values = values[:_LOOKED_AT]
    values = values[np.isfinite(values)]
    if bits is None or range_v is None or (values != np.rint(values)).any():
        return ChannelVolts(caution=f"{name!r} has no unit: it is taken as volts")
    offset = calibration.chain.get("adc_offset")
    return ChannelVolts(
        scale=step_v(float(range_v.magnitude), float(bits.magnitude)),
        offset_v=0.0 if offset is None else float(offset.magnitude),
        caution=f"{name!r} has no unit and holds whole numbers: it is taken as ADC counts",
    )
