"""The readout that a calibration was made with, as its file keeps it."""

from calibration.record import Calibration
from metro.readout import Pole, Readout

__all__ = ["CORNERS", "kept_readout"]

CORNERS = ("amplifier_corner", "antialias_corner")


def kept_readout(calibration: Calibration) -> Readout:
    """Return amplifier, anti-alias filter, aperture and channel delay.

    Parameters
    ----------
    calibration : Calibration
        What its chain does not keep is taken as perfect.

    Returns
    -------
    Readout
        Poles with their u.
    """
    amplifier, antialias = (_maybe_pole(calibration, name) for name in CORNERS)
    times = (calibration.chain.get(name) for name in ("aperture", "channel_delay"))
    aperture_s, delay_s = (0.0 if t is None else float(t.magnitude) for t in times)
    return Readout(amplifier, antialias, aperture_s, delay_s)


def _maybe_pole(calibration: Calibration, name: str) -> Pole | None:
    corner = calibration.chain.get(name)
    if corner is None:
        return None
    return Pole(name, float(corner.magnitude), float(corner.u_magnitude or 0.0))
