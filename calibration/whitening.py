"""Whitening: the short filter that makes the noise of a recording flat.

Plain least squares lets the ends of a record leak into a line when the noise is steep: in 1/f² noise
that alone doubles the variance. Sent through the same short filter, samples and carriers give the
best estimate again. The filter is a linear prediction, found together with lines and offset, and it is
one tap long, no filter at all, where the noise is white.
"""

from collections.abc import Iterator
from dataclasses import dataclass
from typing import TYPE_CHECKING

import numpy as np
from numpy.typing import NDArray

from calibration.phase_course import PhaseCourse
from calibration.phasors import start_phases
from calibration.tall_product import tall_product

if TYPE_CHECKING:
    from calibration.line_source import SourceChannel

__all__ = ["choose_taps", "tap_response"]

_ORDERS = (1, 2, 3, 4, 6, 8, 12, 16)
_SEGMENTS = 8
_SEGMENT_SAMPLES = 1 << 14
_SEGMENT_ROWS = 768
_ROWS_A_COLUMN = 4
# A filter of reach r loses r samples after each gap. In 1/f² noise no filter costs half the
# information, so above this share lost a shorter filter is taken.
_MOST_LOST = 0.4


def tap_response(taps: tuple[float, ...], cycles: NDArray[np.float64]) -> NDArray[np.complex128]:
    """Return the response of a filter.

    Parameters
    ----------
    taps : tuple of float
        Filter h.
    cycles : ndarray
        Frequencies in cycles a sample.

    Returns
    -------
    ndarray of complex
        Σ_j h_j·e^(−2πi·cycles·j).
    """
    turns = np.outer(cycles, np.arange(len(taps)))
    return np.asarray(np.exp(-2j * np.pi * turns) @ np.asarray(taps))


def choose_taps(
    channel: "SourceChannel",
    cycles: NDArray[np.float64],
    course: PhaseCourse,
    tones: NDArray[np.float64] | None = None,
) -> tuple[float, ...]:
    """Return the whitening filter that the data ask for.

    Parameters
    ----------
    channel : SourceChannel
        Samples of any real type, NaN where missing.
    cycles : ndarray, shape (n_lines,)
        Lines present, in cycles a sample; they do not count as noise.
    course : PhaseCourse
        How their phases run away from that.
    tones : ndarray, optional
        Unnamed tones, in cycles a sample, that do not count as noise either.

    Returns
    -------
    tuple of float
        Taps h with h_0 = 1; (1.0,) for noise that is already white.

    Notes
    -----
    Least-squares linear prediction with lines and an offset as further regressors, over up to eight
    stretches of the recording; the order by the Bayesian information criterion. The lags are
    multiples of an eighth of the shortest period, so that the filter works where the lines are,
    whatever the sampling rate, and has no zero near a line.

    References
    ----------
    Schwarz, Ann. Statist. 6 (1978) 461; cited from memory.
    """
    lag = max(1, int(1 / (8 * float(cycles.max()))))
    orders = [p for p in _ORDERS if 20 * p * lag <= len(channel)]
    if not orders:
        return (1.0,)
    products, rows = _lag_products(
        channel,
        _Waves(cycles if tones is None else np.concatenate([cycles, tones]), course),
        lag,
        orders[-1],
    )
    if rows < 2 * _ORDERS[-1]:
        return (1.0,)
    best, order = _information(products[0, 0], rows, 0), 0
    for p in orders:
        value = _information(_prediction_error(products, p), rows, p)
        if value < best and _lost_share(channel, p * lag) <= _MOST_LOST:
            best, order = value, p
    return _spread_taps(products, order, lag)


def _information(variance: float, rows: int, order: int) -> float:
    return rows * float(np.log(max(variance, np.finfo(float).tiny))) + order * float(np.log(rows))


def _coefficients(products: NDArray[np.float64], order: int) -> NDArray[np.float64]:
    gram = products[1 : order + 1, 1 : order + 1]
    return np.asarray(
        np.linalg.pinv(gram, rcond=1e-12, hermitian=True) @ products[1 : order + 1, 0]
    )


def _prediction_error(products: NDArray[np.float64], order: int) -> float:
    return float(products[0, 0] - products[0, 1 : order + 1] @ _coefficients(products, order))


def _spread_taps(products: NDArray[np.float64], order: int, lag: int) -> tuple[float, ...]:
    taps = np.zeros(order * lag + 1)
    taps[0] = 1.0
    if order:
        taps[lag::lag] = -_coefficients(products, order)
    return tuple(taps.tolist())


def _lost_share(channel: "SourceChannel", reach: int) -> float:
    """Return the share of the present samples that a filter of this reach cannot use."""
    looked = channel.stretch(0, min(len(channel), _SEGMENTS * _SEGMENT_SAMPLES))
    present = np.isfinite(looked)
    if present.all() or not present.any():
        return 0.0
    run = np.concatenate([[0], np.cumsum(present)])
    kept = run[reach + 1 :] - run[: -reach - 1] == reach + 1
    return 1.0 - float(kept.sum()) / float(present[reach:].sum())


@dataclass(frozen=True, slots=True)
class _Waves:
    cycles: NDArray[np.float64]
    course: PhaseCourse

    def columns(self, n: NDArray[np.int64]) -> NDArray[np.float64]:
        # n counts from the first sample looked at; a constant phase is free for the fit.
        phase = start_phases(self.cycles, n)
        if len(self.course.theta):
            first = self.course.middle + 0.5 - self.course.half
            lines = self.course.scales.shape[1]
            phase[:, :lines] += self.course.phase(n.astype(np.float64) + first)
        return np.hstack([np.cos(phase), np.sin(phase)])


def _lag_products(
    channel: "SourceChannel", waves: "_Waves", lag: int, order: int
) -> tuple[NDArray[np.float64], int]:
    """Return Σ of products of the lagged samples, lines and offset taken out, and the row count."""
    total, rows = np.zeros((order + 1, order + 1)), 0
    for n, lagged in _lagged_rows(channel, lag, order):
        known = _known(waves.columns(n), n)
        if len(n) <= 2 * known.shape[1]:
            continue
        # Centred first: an offset far above the noise must not eat the digits of the products.
        lagged = lagged - lagged.mean()
        # Twice, so that what rounding leaves of the lines is small against the noise too.
        inverse = np.linalg.pinv(tall_product(known, known), rcond=1e-12, hermitian=True)
        lagged = lagged - known @ (inverse @ tall_product(known, lagged))
        lagged = lagged - known @ (inverse @ tall_product(known, lagged))
        total += tall_product(lagged, lagged)
        rows += len(n) - known.shape[1]
    return total, rows


def _known(columns: NDArray[np.float64], n: NDArray[np.int64]) -> NDArray[np.float64]:
    """Return what is no noise: lines, an offset, and lines that grow or slip through the stretch.

    A line that is not steady would look like noise that is strongest right there, and the filter would
    bend the response around it.
    """
    plain = np.hstack([columns, np.ones((len(n), 1))])
    if len(n) < _ROWS_A_COLUMN * 3 * columns.shape[1]:
        return plain
    x = ((n - n.mean()) / max(1.0, float(np.ptp(n))))[:, None]
    return np.hstack([plain, x * columns, x * x * columns])


def _lagged_rows(
    channel: "SourceChannel", lag: int, order: int
) -> Iterator[tuple[NDArray[np.int64], NDArray[np.float64]]]:
    reach = order * lag
    length = min(len(channel), max(_SEGMENT_SAMPLES, 4 * reach))
    segments = min(_SEGMENTS, max(1, len(channel) // length))
    for begin in np.linspace(0, len(channel) - length, segments).astype(np.int64):
        n = np.unique(
            np.linspace(begin + reach, begin + length - 1, _SEGMENT_ROWS).astype(np.int64)
        )
        stretch = channel.stretch(int(begin), int(begin) + length)
        lagged = stretch[n[:, None] - begin - lag * np.arange(order + 1)].astype(np.float64)
        good = np.isfinite(lagged).all(axis=1)
        if good.any():
            yield n[good], lagged[good]
