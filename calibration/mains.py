"""The mains taken out of a scan: added to the light it would make the fringe look larger.

A hum rides on top and bottom of the fringe alike, and the extremes found are those of fringe and
hum together. A sine at the mains' frequency and its harmonics, fitted over the whole scan, takes it
off; of the fringe itself it takes next to nothing, as a sweep stays at no frequency for long.
"""

from math import sqrt

import numpy as np
from numpy.typing import NDArray

from calibration.errors import CalibrationError
from calibration.lines import fit_lines_si

__all__ = ["without_mains"]

FloatArray = NDArray[np.float64]

ORDERS = (1, 2, 3)
SEEN = 8.0  # amplitude over its u from which a harmonic is taken for the mains
LARGEST = 0.1  # of the scan's half span: what is larger is the sweep itself


def without_mains(values: FloatArray, rate_hz: float, mains_hz: float) -> FloatArray:
    """Return a scan without the mains and its harmonics, as far as they stand out.

    Parameters
    ----------
    values : ndarray, shape (n,)
        Photodiode samples of a scan [V], NaN where missing.
    rate_hz : float
        Samples a second [Hz].
    mains_hz : float
        Frequency of the mains [Hz].

    Returns
    -------
    ndarray, shape (n,)
        The scan; the same array where no mains was seen.
    """
    frequencies_hz = [k * mains_hz for k in ORDERS if k * mains_hz < 0.45 * rate_hz]
    if not frequencies_hz or not np.isfinite(values).any():
        return values
    try:
        # the sweep's own lines would be taken for a clock error
        fit = fit_lines_si(
            values, rate_hz, frequencies_hz, mains_hz=mains_hz, search_clock=False, value_unit="V"
        )
    except CalibrationError:  # too short to tell the mains from the sweep
        return values
    largest_v = LARGEST * float(np.nanmax(values) - np.nanmin(values)) / 2
    time_s = np.arange(values.size) / rate_hz
    for line in fit.lines:
        size, u = abs(line.phasor), sqrt(float(np.trace(line.phasor_covariance)) / 2)
        if SEEN * u < size < largest_v:
            turn = 2 * np.pi * line.frequency_hz * time_s + np.angle(line.phasor)
            values = values - size * np.cos(turn)
    return values
