"""Channel fit: all lines of one channel, with the noise beside each and an honest covariance."""

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from calibration.joint_fit import (
    JointFit,
    Regressors,
    drift_functions,
    fit_jointly,
    real_map,
    residual_phasors,
)
from calibration.line_noise import LineNoise, measure_noise, noise_bins
from calibration.phase_course import PhaseCourse
from calibration.phasors import BlockPhasors

__all__ = ["ChannelFit", "fit_channel"]

_HIGHEST_DRIFT = 4
_FAR = 8.0  # bins of 1/T
_ENOUGH_BLOCKS = 32
_GROUPS = 256


@dataclass(frozen=True, slots=True)
class ChannelFit:
    """One channel, as its whitening filter left it.

    Parameters
    ----------
    coefficients : ndarray of complex, shape (n_lines,)
        A·e^(iφ) of each line where the phase course is zero, filtered.
    steps : ndarray, shape (n_parameters,)
        What the fit adds to the parameters of the phase course.
    covariance : ndarray, shape (2·n_lines + n_parameters, same)
        Of real parts, imaginary parts and parameters.
    noise : tuple of LineNoise
        Beside each line.
    inflation : ndarray, shape (n_lines,)
        Variance of each line over that of a lone line in the same number of samples.
    used : int
        Samples used.
    drift : ndarray, shape (n_drift,)
        Coefficients of the drift, offset first.
    middles, counts : ndarray, shape (n_groups,)
        Middle [samples] and samples used of some hundred groups of blocks.
    residual : ndarray of complex, shape (n_groups, n_lines)
        Residual phasors of each, the phase course taken out.
    group : int
        Samples in a full group.
    """

    coefficients: NDArray[np.complex128]
    steps: NDArray[np.float64]
    covariance: NDArray[np.float64]
    noise: tuple[LineNoise, ...]
    inflation: NDArray[np.float64]
    used: int
    drift: NDArray[np.float64]
    middles: NDArray[np.float64]
    counts: NDArray[np.int64]
    residual: NDArray[np.complex128]
    group: int

    def line_covariance(self, line: int) -> NDArray[np.float64]:
        """Return the covariance of a line's real and imaginary part, shape (2, 2)."""
        pick = [line, line + len(self.coefficients)]
        return self.covariance[np.ix_(pick, pick)]


def fit_channel(
    phasors: BlockPhasors,
    lines: int,
    course: PhaseCourse,
    *,
    refine: bool = True,
    drift: int | None = None,
) -> ChannelFit:
    """Fit all lines of a channel.

    Parameters
    ----------
    phasors : BlockPhasors
        The channel; its first carriers are the lines, the rest unnamed tones.
    lines : int
        Number of lines.
    course : PhaseCourse
        Where the phases run.
    refine : bool
        Fit the parameters of the phase course too, linearised; otherwise it is kept as it is.
    drift : int, optional
        Degree of the drift, 0 for an offset alone; by the slowest line where not given.

    Returns
    -------
    ChannelFit
        Covariance from the noise beside each line, the fit's own sensitivity kept.
    """
    order = _drift_order(phasors, lines) if drift is None else drift
    narrow = _regressors(phasors, lines, course, order)
    regressors, table, fit = _solve(phasors, narrow, course if refine else None)
    residual = residual_phasors(phasors, regressors, fit)
    if len(course.theta):
        residual[:, :lines] *= np.exp(-1j * course.phase(phasors.middles))
    noise = _noise(phasors, residual, lines, course)
    covariance = _sandwich(fit, table, regressors, noise)
    r, m = len(narrow.carrier), len(course.theta) if refine else 0
    kept = np.r_[0:lines, r : r + lines, 2 * r : 2 * r + m]
    diagonal = np.diag(fit.inverse)
    return ChannelFit(
        fit.coefficients[:lines],
        fit.solution[2 * r : 2 * r + m],
        covariance[np.ix_(kept, kept)],
        noise,
        0.25 * phasors.used * (diagonal[:lines] + diagonal[r : r + lines]),
        phasors.used,
        fit.drift,
        *_grouped(phasors, residual[:, :lines]),
    )


def _grouped(
    phasors: BlockPhasors, residual: NDArray[np.complex128]
) -> tuple[NDArray[np.float64], NDArray[np.int64], NDArray[np.complex128], int]:
    size = max(1, len(residual) // _GROUPS)
    edges = np.arange(0, len(residual), size)
    counts = np.add.reduceat(phasors.counts, edges)
    middles = np.add.reduceat(phasors.middles, edges) / np.diff(np.append(edges, len(residual)))
    return middles, counts, np.add.reduceat(residual, edges), size * phasors.block


def _regressors(
    phasors: BlockPhasors,
    lines: int,
    course: PhaseCourse,
    order: int,
) -> Regressors:
    regressors = Regressors.steady(phasors, drift_functions(phasors, order))
    if len(course.theta):
        # Within a block the carrier stands still while the line turns on: the block sees sinc of it.
        turned = np.tensordot(course.theta, course.change(phasors.middles), axes=1) * phasors.block
        seen = np.sinc(turned / (2 * np.pi))
        regressors.weights[:, :lines] = seen * np.exp(1j * course.phase(phasors.middles))
    if len(phasors.cycles) > lines:
        return _with_wander(phasors, regressors, lines)
    return regressors


def _drift_order(phasors: BlockPhasors, lines: int) -> int:
    """Return the degree of the drift: a quarter of the cycles of the slowest line at most."""
    span = float(phasors.middles[-1] - phasors.middles[0] + phasors.block)
    slowest = float(phasors.cycles[:lines].min()) * span
    return int(min(_HIGHEST_DRIFT, slowest / 4, phasors.used / 20))


def _with_wander(phasors: BlockPhasors, regressors: Regressors, lines: int) -> Regressors:
    """Let unnamed tones far from everything else wander: mains is never steady."""
    span = float(phasors.middles[-1] - phasors.middles[0] + phasors.block)
    places = phasors.cycles * span
    apart = np.abs(places[:, None] - places) + np.where(np.eye(len(places)) > 0, np.inf, 0.0)
    far = lines + np.flatnonzero(apart.min(axis=1)[lines:] > _FAR)
    if not len(far) or len(phasors.numbers) < _ENOUGH_BLOCKS:
        return regressors
    shape = drift_functions(phasors, 2)[:, 1:, 0]
    carriers = np.repeat(far, shape.shape[1])
    return regressors.with_lines(carriers, np.tile(shape, len(far)).astype(np.complex128))


def _solve(
    phasors: BlockPhasors, narrow: Regressors, course: PhaseCourse | None
) -> tuple[Regressors, NDArray[np.float64] | None, JointFit]:
    """Solve for lines, drift and, linearised about the present course, its parameters."""
    fit = fit_jointly(phasors, narrow)
    if course is None or not len(course.theta):
        return narrow, None, fit
    r = len(narrow.carrier)
    wider, which = _with_course(phasors, narrow, course)
    effects = np.zeros((2 * r + len(course.theta), len(wider.carrier)), dtype=np.complex128)
    effects[:r, :r], effects[r : 2 * r, :r] = np.eye(r), 1j * np.eye(r)
    for column, (m, line) in enumerate(which):
        effects[2 * r + m, r + column] = fit.coefficients[line]
    table = real_map(effects, wider.drift.shape[1])
    return wider, table, fit_jointly(phasors, wider, table)


def _with_course(
    phasors: BlockPhasors, narrow: Regressors, course: PhaseCourse
) -> tuple[Regressors, list[tuple[int, int]]]:
    """Append the derivative of each line by each parameter that moves it."""
    which = [(int(m), int(k)) for m, k in np.argwhere(course.scales != 0)]
    m, k = np.array(which).T
    functions = course.at(phasors.middles)[m, :, k].T
    weights = 1j * functions * narrow.weights[:, k]
    slopes = None
    if phasors.slopes is not None:
        change = course.change(phasors.middles)[m, :, k].T * phasors.block
        slopes = 1j * change * narrow.weights[:, k]
    return narrow.with_lines(k, weights, slopes), which


def _noise(
    phasors: BlockPhasors, residual: NDArray[np.complex128], lines: int, course: PhaseCourse
) -> tuple[LineNoise, ...]:
    offsets, bins = noise_bins(phasors, residual, lines)
    span = float(phasors.middles[-1] - phasors.middles[0] + phasors.block)
    places, blocks = phasors.cycles * span, span / phasors.block
    result = []
    for line in range(lines):
        taken = np.append(np.delete(places, line), 0.0)
        share = _course_share(offsets, course, line)
        result.append(
            measure_noise(
                offsets, bins[:, line], float(places[line]), taken, share, 0.5 * span, blocks
            )
        )
    return tuple(result)


def _course_share(
    offsets: NDArray[np.int64], course: PhaseCourse, line: int
) -> NDArray[np.float64]:
    """Return the share of each bin that the parameters of the phase course take.

    The Legendre polynomials of degree 1 and 2 put 3/(πj)² and 45/(πj)⁴ of their power into bin j; one
    real parameter takes half of that, shared by the lines it moves.
    """
    share = np.zeros(len(offsets))
    for degree, scales in zip(course.degrees, course.scales, strict=True):
        if scales[line] != 0 and degree <= 2:
            power = (3.0 / (np.pi * offsets) ** 2, 45.0 / (np.pi * offsets) ** 4)[degree - 1]
            share += 0.5 * power * scales[line] ** 2 / (scales**2).sum()
    return share


def _sandwich(
    fit: JointFit,
    table: NDArray[np.float64] | None,
    regressors: Regressors,
    noise: tuple[LineNoise, ...],
) -> NDArray[np.float64]:
    """Return the covariance of all parameters, each line's score with the noise beside it."""
    beside = np.array([n.variance for n in noise])
    mean = float(beside.mean())
    of_lines = np.where(
        regressors.carrier < len(beside),
        beside[np.minimum(regressors.carrier, len(beside) - 1)],
        mean,
    )
    drift = np.full(regressors.drift.shape[1], mean)
    deviation = np.sqrt(np.concatenate([of_lines, of_lines, drift]))
    scores = fit.gram * np.outer(deviation, deviation)
    if table is not None:
        scores = table.T @ scores @ table
    covariance = np.asarray(fit.inverse @ scores @ fit.inverse)
    # Rounding may leave a variance of −1e-30 where nothing is left over.
    np.fill_diagonal(covariance, np.maximum(np.diag(covariance), 0.0))
    return covariance
