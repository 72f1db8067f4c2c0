"""Sine fit: the three- and four-parameter fits of IEEE 1057, by block phasors.

Plain least squares of one sine and an offset, every sample weighted alike: what an ADC test needs, and what
the line fit comes to in white noise without drift.
"""

from dataclasses import dataclass
from typing import Any

import numpy as np
from numpy.typing import NDArray

from calibration.channel_fit import fit_channel
from calibration.errors import CalibrationError
from calibration.line_source import ArraySource
from calibration.phase_course import free_course
from calibration.phasors import block_phasors
from calibration.survey import look, nearest_peaks

__all__ = ["SineFit", "fit_sine"]

_ROUNDS = 50
_FEWEST_SAMPLES = 8


@dataclass(frozen=True, slots=True)
class SineFit:
    """A·cos(2πft + φ) + offset, t = 0 at the first sample.

    Parameters
    ----------
    phasor : complex
        A·e^(iφ).
    frequency_hz : float
        Given, or fitted.
    offset : float
        In the unit of the samples.
    """

    phasor: complex
    frequency_hz: float
    offset: float


def fit_sine(
    values: NDArray[Any], rate_hz: float, frequency_hz: float, *, free: bool = False
) -> SineFit:
    """Fit one sine and an offset.

    Parameters
    ----------
    values : ndarray, shape (n,)
        Samples, NaN where missing.
    rate_hz : float
        Sampling rate [Hz].
    frequency_hz : float
        Frequency [Hz], above 0 and below half the rate; a first guess if ``free``.
    free : bool
        Fit the frequency too: four parameters instead of three.

    Returns
    -------
    SineFit
        The least-squares solution.

    Raises
    ------
    CalibrationError
        If the frequency lies outside or there are fewer than 8 values.

    References
    ----------
    IEEE Std 1057-2017, clauses on three- and four-parameter sine fitting; cited from memory.
    """
    samples = np.asarray(values)
    if len(samples) < _FEWEST_SAMPLES:
        raise CalibrationError(
            f"a sine fit needs at least {_FEWEST_SAMPLES} values, got {len(samples)}"
        )
    if not 0 < frequency_hz < 0.5 * rate_hz:
        raise CalibrationError(
            f"the frequency must lie above 0 Hz and below {0.5 * rate_hz:g} Hz, got {frequency_hz:g} Hz"
        )
    cycles = np.array([frequency_hz / rate_hz])
    course = free_course(1, 0, len(samples), rate_hz)
    survey = look(ArraySource([samples], rate_hz).channels()[0]) if free else None
    if survey is not None:
        cycles = nearest_peaks([survey], cycles)
    for _ in range(_ROUNDS):
        phasors = block_phasors(samples, cycles, slopes=free)
        fit = fit_channel(phasors, 1, course, refine=free, drift=0)
        if not free or abs(fit.steps[0]) * len(samples) < 1e-13 * rate_hz:
            break
        cycles = cycles + fit.steps / rate_hz
    return SineFit(complex(fit.coefficients[0]), float(cycles[0] * rate_hz), float(fit.drift[0]))
