"""What a conversion can undo or apply against frequency, as a filter within a band.

The readout's poles make fast motion read small; a servo takes off most of the free displacement; and the
actuator's response turns a recorded drive, which its own channel has made small and late, into what it
moves.
"""

from collections.abc import Sequence
from math import hypot, pi

import numpy as np
from numpy.typing import NDArray

from calibration.band_filter import ABOVE, BELOW, BandFilter, design_filter
from calibration.errors import CalibrationError
from calibration.kept_readout import kept_readout
from calibration.open_loop import SIGN, OpenLoop
from calibration.record import Calibration
from metro.readout import Readout

__all__ = ["UNREACHED", "FilterStage", "actuator_stage", "loop_stage", "readout_stage"]

FloatArray = NDArray[np.float64]
ComplexArray = NDArray[np.complex128]

UNREACHED = "no sample has the filter's reach of samples around it"
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
    reasons, cautions : sequence of str
        Why what it leaves must not be trusted; what a user should know.
    """

    def __init__(
        self,
        filter: BandFilter,  # noqa: A002  # the word for it
        relative_u: float,
        text: str,
        *,
        undoes_readout: bool = False,
        reasons: Sequence[str] = (),
        cautions: Sequence[str] = (),
    ) -> None:
        self.filter, self.undoes_readout = filter, undoes_readout
        self.reasons, self.cautions = list(reasons), list(cautions)
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
    electronics = kept_readout(calibration)
    poles = electronics.poles
    if not poles:
        raise CalibrationError(
            "there is no readout to undo: the calibration keeps neither amplifier_corner nor "
            "antialias_corner"
        )

    def inverse(at_hz: FloatArray) -> ComplexArray:
        return np.asarray(
            1.0 / np.array([electronics.response(f) for f in at_hz.tolist()]), complex
        )

    made = design_filter(inverse, 0.0, np.inf, rate_hz)
    u = hypot(*(pole.relative_effect(made.to_hz) for pole in poles))
    what = "amplifier, anti-alias filter and aperture" if electronics.aperture_s else _POLES
    return FilterStage(made, u, f"{what} are undone", undoes_readout=True)


_POLES = "amplifier and anti-alias filter"


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
    return FilterStage(
        made,
        float(u.max()),
        f"the free displacement is restored by 1 + G ({SIGN})",
        reasons=loop.band_reasons(made.from_hz, made.to_hz),
        cautions=loop.cautions,
    )


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
    volts, electronics = float(factor.magnitude), kept_readout(calibration)

    def moved(at_hz: FloatArray) -> ComplexArray:
        read = [
            electronics.counts_response(f) * electronics.drive_response(f) for f in at_hz.tolist()
        ]
        return np.asarray(volts * response.extrapolated(at_hz) / np.array(read))

    made = design_filter(moved, response.from_hz, response.to_hz, rate_hz)
    grid_hz = _grid(made)
    relative, turn = response.u_at(grid_hz)
    delay = calibration.chain.get("channel_delay")
    late = 0.0 if delay is None else 2 * pi * float(delay.u_magnitude or 0.0)
    pole = electronics.antialias
    filtered = [
        0.0 if pole is None else abs(pole.log_slope(f)) * pole.u_hz for f in grid_hz.tolist()
    ]
    u = np.sqrt(relative**2 + turn**2 + (late * grid_hz) ** 2 + np.square(filtered))
    return FilterStage(made, float(u.max()), _drive_text(electronics))


def _drive_text(electronics: Readout) -> str:
    undone = [
        *([] if electronics.antialias is None else ["anti-alias filter"]),
        *(["aperture"] if electronics.aperture_s else []),
        *(["delay"] if electronics.drive_delay_s else []),
    ]
    text = "the drive is taken through the actuator's response"
    if not undone:
        return text
    listed = " and ".join([", ".join(undone[:-1]), undone[-1]] if undone[1:] else undone)
    return f"{text}, with its channel's {listed} undone,"


def _grid(made: BandFilter) -> FloatArray:
    return np.asarray(np.linspace(made.from_hz, made.to_hz, _GRID))
