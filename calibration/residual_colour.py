"""How much more, or less, noise a fit's parameters meet than if what it leaves over were white."""

import numpy as np
from numpy.typing import NDArray

from calibration.fringe_model import FringeModel, filtered

__all__ = ["colour_of"]

FloatArray = NDArray[np.float64]

_SEGMENT = 1 << 16  # samples transformed at once
_SHORTEST = 512  # records below: too few bins to tell a colour
_FIRST = 3  # bin from which the noise at zero is told; nearer ones hold what the fit took
_WIDTHS = (1024, 256, 64)  # bins taken, from far to near
_DOF_A_BIN = 0.86  # of a median: 2, of which one in 1.5 by the window and 0.64 by its efficiency
_SIGNIFICANT = 2.5  # standard deviations by which fewer bins must differ to be taken


def colour_of(
    model: FringeModel, theta: FloatArray, whitening: FloatArray, inverse: FloatArray
) -> tuple[FloatArray, float]:
    """Return how much noise each parameter meets, 1 where it is as if the residuals were white.

    A short filter whitens a record only coarsely: a hump or a steep slope of the noise at one line
    remains, and noise of the phase comes and goes with the fringe's slope. Both show in the spectrum of
    what each sample's residual does to a parameter: near frequency zero it tells the variance of their
    sum, which is the parameter's error.

    Parameters
    ----------
    model : FringeModel
        The whole record in order, NaN where samples are missing.
    theta : ndarray, shape (n_parameters,)
        Fitted parameters.
    whitening : ndarray, shape (order + 1,)
        Prediction-error filter, first weight 1.
    inverse : ndarray, shape (n_parameters, n_parameters)
        Of the normal equations' matrix, in any unit.

    Returns
    -------
    tuple of ndarray, shape (n_parameters,), and float
        Ratio of standard deviations, 1 for the parameters of the drift, and degrees of freedom of
        what is known of it; inf where the record is too short to tell.
    """
    factors = np.ones(model.size)
    length = min(len(model.values) - len(whitening) + 1, _SEGMENT)
    if length < _SHORTEST:
        return factors, float("inf")
    ratios, segments = _ratios(model, theta, whitening, inverse, length)
    told = [_ratio_at_zero(column, segments) for column in ratios.T]
    factors[: model.fixed] = np.sqrt([ratio for ratio, _ in told])
    factors[:2] = np.maximum(factors[:2], 1.0)  # extremes: the drift takes up their slowest noise
    return factors, min(dof for _, dof in told)


def _ratio_at_zero(ratios: FloatArray, segments: int) -> tuple[float, float]:
    """Return the power at zero over the mean, and its degrees of freedom.

    From the median of many bins to that of few: fewer are nearer, and taken where they differ.
    """
    mean_over_median = (1.0 - 1.0 / (9.0 * segments)) ** -3  # Wilson and Hilferty's χ²
    level, level_dof = 1.0, float("inf")
    for width in _WIDTHS:
        if len(ratios) < _FIRST + width:
            continue
        near = float(np.median(ratios[_FIRST : _FIRST + width])) * mean_over_median
        dof = _DOF_A_BIN * width * segments
        if abs(near / level - 1.0) > _SIGNIFICANT * np.sqrt(2.0 / dof):
            level, level_dof = near, dof
    return level, level_dof


def _ratios(
    model: FringeModel,
    theta: FloatArray,
    whitening: FloatArray,
    inverse: FloatArray,
    length: int,
) -> tuple[FloatArray, int]:
    """Return the power of the samples' effects from zero up over the mean, and the segments."""
    lead, n, chunks = len(whitening) - 1, len(model.values), model.chunks()
    window = np.hanning(length + 2)[1:-1, None]
    starts = range(0, n - lead - length + 1, length)
    bins = min(_FIRST + max(_WIDTHS), length // 4)
    power, mean = np.zeros((bins, model.fixed)), np.zeros(model.fixed)
    for start in starts:
        columns = _columns(model, theta, inverse, chunks, slice(start, start + lead + length))
        columns = filtered(columns, whitening)
        effect = np.nan_to_num(columns[:, 1:] * columns[:, :1]) * window
        power += np.abs(np.fft.rfft(effect, axis=0)[:bins]) ** 2
        mean += np.einsum("ij,ij->j", effect, effect)
    return np.divide(power, mean, out=np.ones_like(power), where=mean > 0.0), len(starts)


def _columns(
    model: FringeModel,
    theta: FloatArray,
    inverse: FloatArray,
    chunks: list[tuple[int, int]],
    part: slice,
) -> FloatArray:
    """Return residuals and, for all parameters but the drift's, what they are weighted with."""
    start, stop, step = part.start, part.stop, chunks[0][1]
    out = np.empty((stop - start, 1 + model.fixed))
    for begin, end in chunks[start // step : -(-stop // step)]:
        first, last = max(begin, start), min(end, stop)
        rest, parts, where = model.rows(theta, first, last)
        out[first - start : last - start, 0] = rest
        out[first - start : last - start, 1:] = parts @ inverse[where, : model.fixed]
    return out
