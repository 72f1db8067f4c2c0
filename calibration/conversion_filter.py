"""What a conversion can undo or apply against frequency, as a filter within a band.

The readout's poles make fast motion read small; a servo takes off most of the free displacement; and the
actuator's response turns a recorded drive into what it moves.
"""

from math import hypot

import numpy as np
from numpy.typing import NDArray

from calibration.band_filter import ABOVE, BELOW, BandFilter, design_filter
from calibration.errors import CalibrationError
from calibration.open_loop import OpenLoop
from calibration.record import Calibration
from metro.readout import Pole

__all__ = ["CORNERS", "FilterStage", "actuator_stage", "loop_stage", "readout_stage"]

FloatArray = NDArray[np.float64]
ComplexArray = NDArray[np.complex128]

CORNERS = ("amplifier_corner", "antialias_corner")
_GRID = 64  # frequencies of the band at which the largest u is looked for


class FilterStage:
    """One filter with its uncertainty and the words for it.

    Parameters
    ----------
    filter : BandFilter
        Taps and band.
    relative_u : float
        Largest relative standard uncertainty of the response in the band, the filter's own
        deviation included.
    text : str
        What it does.
    undoes_readout : bool
        Whether the readout's corners are undone by it.
    """

    def __init__(
        self,
        filter: BandFilter,  # noqa: A002  # the word for it
        relative_u: float,
        text: str,
        *,
        undoes_readout: bool = False,
    ) -> None:
        self.filter, self.undoes_readout = filter, undoes_readout
        self.relative_u = hypot(relative_u, filter.error)
        self.text = (
            f"{text} from {filter.from_hz:g} Hz to {filter.to_hz:g} Hz"
            f"{', nothing is left outside' if filter.from_hz else ''}"
        )


def readout_stage(calibration: Calibration, rate_hz: float) -> FilterStage:
    """Return the filter that undoes amplifier and anti-alias filter.

    Parameters
    ----------
    calibration : Calibration
        Keeps the corners.
    rate_hz : float
        Samples a second [Hz].

    Raises
    ------
    CalibrationError
        If the calibration keeps no corner.
    """
    corners = [calibration.chain[name] for name in CORNERS if name in calibration.chain]
    if not corners:
        raise CalibrationError(
            "there is no readout to undo: the calibration keeps neither amplifier_corner nor "
            "antialias_corner"
        )

    poles = [Pole("", float(c.magnitude), float(c.u_magnitude or 0.0)) for c in corners]

    def inverse(at_hz: FloatArray) -> ComplexArray:
        responses = [[pole.response(float(f)) for f in at_hz] for pole in poles]
        return np.asarray(1.0 / np.prod(responses, axis=0))

    made = design_filter(inverse, 0.0, np.inf, rate_hz)
    u = hypot(*(pole.relative_effect(made.to_hz) for pole in poles))
    text = "amplifier and anti-alias filter are undone"
    return FilterStage(made, u, text, undoes_readout=True)


def loop_stage(loop: OpenLoop, rate_hz: float) -> FilterStage:
    """Return the filter that restores the free displacement, 1 + G, within the gain's table."""
    first, last = float(loop.frequency_hz[0]), float(loop.frequency_hz[-1])
    made = design_filter(
        lambda at_hz: loop.factor(np.clip(at_hz, first, last)),
        first / (1.0 - BELOW),
        last / (1.0 + ABOVE),
        rate_hz,
    )
    size, turn, share = loop.effect(_grid(made))
    u = np.hypot(size, turn) * np.abs(share)
    return FilterStage(made, float(u.max()), "the free displacement is restored")


def actuator_stage(calibration: Calibration, rate_hz: float) -> FilterStage:
    """Return the filter from volts of the drive's channel to the displacement that they make [m].

    Parameters
    ----------
    calibration : Calibration
        With the actuator's response between the lines, and how the drive is read.
    rate_hz : float
        Samples a second [Hz].

    Raises
    ------
    CalibrationError
        If it keeps no response, or not how the drive is read.
    """
    response, factor = calibration.response, calibration.chain.get("drive_factor")
    if response is None or factor is None:
        raise CalibrationError(
            "the calibration keeps no response of the actuator between its lines (it takes at "
            "least three lines and a recorded drive)"
        )
    volts = float(factor.magnitude)
    made = design_filter(
        lambda at_hz: volts * response.extrapolated(at_hz),
        response.from_hz,
        response.to_hz,
        rate_hz,
    )
    relative, turn = response.u_at(_grid(made))
    u = float(np.hypot(relative, turn).max())
    return FilterStage(made, u, "the drive is taken through the actuator's response")


def _grid(made: BandFilter) -> FloatArray:
    return np.asarray(np.linspace(made.from_hz, made.to_hz, _GRID))
