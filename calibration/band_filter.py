"""A short filter that follows a complex frequency response within a band and is zero outside it.

Designed by frequency sampling with a Kaiser window (Kaiser 1974): the wanted response on a fine grid,
tapered beyond the band's ends, transformed to taps and windowed. How far the filter then is from what
was wanted is computed and kept, not assumed.
"""

from collections.abc import Callable
from dataclasses import dataclass
from math import ceil

import numpy as np
from numpy.typing import NDArray

from calibration.errors import CalibrationError

__all__ = ["ABOVE", "BELOW", "BandFilter", "design_filter"]

FloatArray = NDArray[np.float64]
ComplexArray = NDArray[np.complex128]

HIGHEST = 0.45  # of the rate: room for the taper below half of it
BELOW, ABOVE = 0.5, 0.25  # of the band's ends: widths over which the filter falls to zero outside
MARGIN = 0.4  # of these widths, over which it does not fall yet
_BETA = 9.0  # of the window: side lobes of 1e-4
_LOBES = 6.0  # taps a taper, in periods of its width: the window's main lobe is 2·√(1+(9/π)²) = 6.1
_TAPS_MAX = 1 << 20
_ERROR_SMALL, _ERROR_MAX = 2e-3, 0.01


@dataclass(frozen=True, eq=False)
class BandFilter:
    """Taps and what they do.

    Parameters
    ----------
    taps : ndarray, shape (2m + 1,)
        Tap ``j`` multiplies the sample ``j − m`` steps back.
    from_hz, to_hz : float
        Band in which the filter is what was wanted [Hz].
    error : float
        Largest relative deviation from it in the band.
    """

    taps: FloatArray
    from_hz: float
    to_hz: float
    error: float

    @property
    def reach(self) -> int:
        """Samples before and after one that enter it."""
        return self.taps.size // 2

    def apply(self, values: FloatArray) -> FloatArray:
        """Return filtered samples.

        Parameters
        ----------
        values : ndarray, shape (n + 2m,)
            NaN where missing.

        Returns
        -------
        ndarray, shape (n,)
            NaN where a missing sample lies within reach.
        """
        count = values.size - 2 * self.reach
        missing = ~np.isfinite(values)
        size = 1 << ceil(np.log2(values.size + self.taps.size))
        spectrum = np.fft.rfft(np.where(missing, 0.0, values), size) * np.fft.rfft(self.taps, size)
        out = np.fft.irfft(spectrum, size)[2 * self.reach : 2 * self.reach + count]
        so_far = np.concatenate([[0], np.cumsum(missing)])
        out[so_far[2 * self.reach + 1 :] > so_far[:count]] = np.nan
        return np.asarray(out)


def design_filter(
    response: Callable[[FloatArray], ComplexArray], from_hz: float, to_hz: float, rate_hz: float
) -> BandFilter:
    """Return the filter that follows a response within a band.

    Parameters
    ----------
    response : callable
        Complex response at frequencies [Hz] from half the band's lower end to five quarters of its
        upper one: beyond the ends the filter falls to zero.
    from_hz, to_hz : float
        Ends of the band [Hz]; ``from_hz`` = 0 takes in the mean.
    rate_hz : float
        Samples a second [Hz]; the band ends at 0.45 of it at most.

    Returns
    -------
    BandFilter
        With its largest deviation.

    Raises
    ------
    CalibrationError
        If the band is empty at this rate, or would need more than a million taps, or the response
        changes too fast to be followed.

    References
    ----------
    Kaiser, Proc. IEEE Int. Symp. Circuits and Systems, 20 (1974); from memory.
    """
    to_hz = min(to_hz, HIGHEST * rate_hz)
    if not 0 <= from_hz < to_hz:
        raise CalibrationError(
            f"nothing is left of the band from {from_hz:g} Hz up to {HIGHEST:g} of the rate, "
            f"{HIGHEST * rate_hz:g} Hz"
        )
    below = BELOW * from_hz if from_hz else np.inf
    above = min(ABOVE * to_hz, 0.5 * rate_hz - to_hz)
    reach = ceil(_LOBES * rate_hz / min(below, above) / 2)
    if 2 * reach + 1 > _TAPS_MAX:
        raise CalibrationError(
            f"a band from {from_hz:g} Hz at {rate_hz:g} samples a second needs {2 * reach + 1} taps, "
            f"more than {_TAPS_MAX}"
        )
    for longer in (1, 2, 4, 8):  # a response that turns fast needs a longer memory
        made = _designed(response, from_hz, to_hz, rate_hz, longer * reach)
        if made.error < _ERROR_SMALL:
            break
    if made.error > _ERROR_MAX:
        raise CalibrationError(
            f"the response from {from_hz:g} Hz to {to_hz:g} Hz changes too fast to be followed: "
            f"the filter is off by {100 * made.error:.2g} %"
        )
    return made


def _designed(
    response: Callable[[FloatArray], ComplexArray],
    from_hz: float,
    to_hz: float,
    rate_hz: float,
    reach: int,
) -> BandFilter:
    size = 1 << ceil(np.log2(16 * reach))
    grid_hz = np.asarray(np.arange(size // 2 + 1) * (rate_hz / size))
    taper = _taper(grid_hz, from_hz, to_hz, rate_hz)
    wanted = np.zeros(grid_hz.size, dtype=np.complex128)
    wanted[taper > 0] = response(grid_hz[taper > 0]) * taper[taper > 0]
    wanted[0] = wanted[0].real
    whole = np.fft.irfft(wanted, size)
    taps = np.concatenate([whole[-reach:], whole[: reach + 1]]) * np.kaiser(2 * reach + 1, _BETA)
    turned = np.exp(2j * np.pi * grid_hz / rate_hz * reach)
    found = np.fft.rfft(taps, size) * turned
    inside = (grid_hz >= max(from_hz, rate_hz / size)) & (grid_hz <= to_hz)
    error = float(np.max(np.abs(found[inside] / wanted[inside] - 1.0)))
    return BandFilter(taps, from_hz, to_hz, error)


def _taper(grid_hz: FloatArray, from_hz: float, to_hz: float, rate_hz: float) -> FloatArray:
    """Return 1 in the band and a little beyond, then half a period of a cosine down to zero.

    The margin keeps what the window smooths at the cosine's ends out of the band.
    """
    above = min(ABOVE * to_hz, 0.5 * rate_hz - to_hz)
    outside = np.clip((grid_hz - to_hz) / above, 0.0, 1.0)
    if from_hz:
        outside = np.maximum(outside, np.clip((from_hz - grid_hz) / (BELOW * from_hz), 0.0, 1.0))
    fallen = np.clip((outside - MARGIN) / (1.0 - MARGIN), 0.0, 1.0)
    return np.asarray(0.5 * (1.0 + np.cos(np.pi * fallen)))
