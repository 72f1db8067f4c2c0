"""The search: from start values to the least squares of a driven fringe, and what it is worth.

Levenberg–Marquardt from several starts on a thinned record, more pieces of drift as long as the
residuals ask for them, then the whole record with residuals and derivatives whitened by the same
short filter.
"""

import math
from dataclasses import dataclass, replace

import numpy as np
from numpy.typing import NDArray

from calibration.descent import Prior, descend
from calibration.fringe_model import FringeModel
from calibration.fringe_start import FringeStart
from calibration.spline import fit_spline, spline_size, spline_weights

__all__ = ["Found", "search"]

_THINNED = 24_000
_RACE = 5_000
_MOST_PIECES = 1024


@dataclass(frozen=True)
class Found:
    """A minimum: the model, its parameters, Σr² and, once finished, covariance and the rest."""

    model: FringeModel
    theta: NDArray[np.float64]
    squares: float
    covariance: NDArray[np.float64]
    dof: float
    whitening: NDArray[np.float64]


def _pieces_of(start: FringeStart, length: int) -> int:
    """Return the pieces that the working phases of the blocks ask for at first."""
    position = start.middle / max(length - 1, 1)
    pieces = 0
    for pieces in (0, 1, 2, 4, 8, 16, 32, 64, 128, 256):
        if spline_size(pieces) > max(len(position) // 2, 1):
            break
        course = _course(fit_spline(position, start.working, pieces), pieces, position)
        if float(np.sqrt(np.mean((start.working - course) ** 2))) < 0.2:
            break
    return pieces


def _course(
    coefficients: NDArray[np.float64], pieces: int, position: NDArray[np.float64]
) -> NDArray[np.float64]:
    return np.asarray(spline_weights(position, pieces, (0, spline_size(pieces))) @ coefficients)


def _theta(start: FringeStart, pieces: int, length: int) -> NDArray[np.float64]:
    """Return the parameters of a start."""
    lines = np.column_stack([start.phasors.real, start.phasors.imag]).ravel()
    drift = fit_spline(start.middle / max(length - 1, 1), start.working, pieces)
    return np.concatenate([[start.offset, start.half_span], lines, drift])


def _thin(values: NDArray[np.float64], most: int) -> NDArray[np.int64]:
    """Return sample numbers for the search, at random steps so that no line can alias."""
    good = np.flatnonzero(np.isfinite(values))
    if len(good) <= most:
        return good
    picked = np.random.default_rng(20240229).random(len(good)) < most / len(good)
    return good[picked]


def search(
    values: NDArray[np.float64],
    turns: NDArray[np.float64],
    starts: list[FringeStart],
    prior: Prior | None,
) -> tuple[Found, float | None]:
    """Descend from every start and follow the drift as closely as the residuals ask.

    Parameters
    ----------
    values : ndarray, shape (n,)
        Record; NaN where samples are missing.
    turns : ndarray, shape (n_lines,)
        Phase of each line per sample [rad].
    starts : list of FringeStart
        At least one.
    prior : Prior or None
        Extremes, where given.

    Returns
    -------
    Found
        The lowest minimum, on a thinned record.
    float or None
        Depth of the first line in the next best minimum where that fits as well, else None.
    """
    length = len(values)
    few, index = _thin(values, _RACE), _thin(values, _THINNED)
    runners = [_entered(values, few, turns, start, prior) for start in starts]
    for rounds, left in ((2, 8), (4, 4), (40, 4)):
        runners = [_run(found, prior, rounds) for found in runners]
        runners.sort(key=lambda found: found.squares)
        runners = runners[:left]
    minima = []
    for found in _different(runners):
        model = FringeModel(values[index], index, length, turns, found.model.pieces)
        minima.append(_run(replace(found, model=model), prior, 40))
    minima.sort(key=lambda found: found.squares)
    first = _refine(minima[0], prior)
    rival = None
    for other in minima[1:]:
        if other.squares > 1.5 * minima[0].squares + 1e-12 * float(values[index] @ values[index]):
            break
        if _same(other, minima[0]):
            continue
        second = _refine(other, prior)
        if second.squares < first.squares:
            first, second = second, first
        if not _same(first, second) and second.squares < first.squares * (1 + 12.0 / len(index)):
            rival = float(np.hypot(second.theta[2], second.theta[3]))
        break
    return first, rival


def _entered(
    values: NDArray[np.float64],
    index: NDArray[np.int64],
    turns: NDArray[np.float64],
    start: FringeStart,
    prior: Prior | None,
) -> Found:
    """Return a start as a minimum still to be found."""
    pieces = _pieces_of(start, len(values))
    model = FringeModel(values[index], index, len(values), turns, pieces)
    theta = _theta(start, pieces, len(values))
    if prior is not None:
        theta[:2] = prior.value
    return Found(model, theta, math.inf, np.zeros((0, 0)), len(index), np.ones(1))


def _run(found: Found, prior: Prior | None, rounds: int) -> Found:
    """Return what a number of rounds makes of it."""
    theta, squares = descend(found.model, found.theta, prior, rounds)
    return replace(found, theta=theta, squares=squares)


def _different(minima: list[Found]) -> list[Found]:
    """Return the minima without those whose depths came before."""
    out: list[Found] = []
    for found in minima:
        if not any(_same(found, other) for other in out):
            out.append(found)
    return out


def _same(first: Found, second: Found) -> bool:
    """Return whether two minima have the same depths."""
    lines = slice(2, 2 + 2 * first.model.n_lines)
    a, b = first.theta[lines].reshape(-1, 2), second.theta[lines].reshape(-1, 2)
    depth_a, depth_b = np.hypot(*a.T), np.hypot(*b.T)
    return bool(np.all(np.abs(depth_a - depth_b) < 0.02 * depth_a + 1e-6))


def _with_pieces(found: Found, pieces: int) -> tuple[FringeModel, NDArray[np.float64]]:
    """Return the same model with more pieces of drift, its parameters carried over."""
    old = found.model
    model = FringeModel(old.values, old.index, old.length, old.turns, pieces, clock=old.clock)
    position = np.linspace(0.0, 1.0, 4 * max(pieces, old.pieces) + 8)
    course = _course(found.theta[old.fixed :], old.pieces, position)
    return model, np.concatenate([found.theta[: old.fixed], fit_spline(position, course, pieces)])


def _refine(found: Found, prior: Prior | None) -> Found:
    """Return the fit with as many pieces of drift as the residuals ask for."""
    count = len(found.model.index)
    periods = float(found.model.turns.min()) * found.model.length / (2.0 * np.pi)
    most = min(_MOST_PIECES, int(periods / 4.0), count // 20)
    pieces, misses = found.model.pieces, 0
    best = found
    while misses < 2:
        pieces = max(2 * pieces, 1)
        if pieces > most:
            break
        model, theta = _with_pieces(best, pieces)
        theta, squares = descend(model, theta, prior, rounds=12)
        more = model.size - best.model.size
        floor = 1e-26 * float(best.model.values @ best.model.values)
        gain = count * math.log((best.squares + floor) / (squares + floor))
        if gain > 2.0 * more + 6.0:
            best = Found(model, theta, squares, best.covariance, best.dof, best.whitening)
            misses = 0
        else:
            misses += 1
    return best
