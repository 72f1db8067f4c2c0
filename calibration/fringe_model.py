"""The driven fringe's model on samples: residuals and their derivatives, chunk by chunk.

V = c + a·cos(φ(t) + Σ Re z_i e^{iω_i(1+ε)(t − t_c)}): offset c, half span a, one phasor z a line about
the record's middle, the clock's error ε if wanted, and the slow phase φ(t) as a spline.
"""

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from calibration.spline import spline_size, spline_span, spline_weights

__all__ = ["FringeModel", "Sums", "filtered"]

_CHUNK = 1 << 12  # small enough for the cache, and for products that one core does alone
_CACHE_CELLS = 4_000_000


@dataclass
class Sums:
    """Sums over all samples for one set of parameters.

    Attributes
    ----------
    matrix : ndarray, shape (n_parameters, n_parameters)
        Σ j jᵀ.
    gradient : ndarray, shape (n_parameters,)
        Σ j·r, r the data minus the model.
    scatter : ndarray, shape (n_parameters, n_parameters)
        Σ j jᵀ r².
    squares : float
        Σ r².
    count : int
        Samples used.
    """

    matrix: NDArray[np.float64]
    gradient: NDArray[np.float64]
    scatter: NDArray[np.float64]
    squares: float
    count: int


class FringeModel:
    """One record, its lines and the pieces of its drift.

    Parameters
    ----------
    values : ndarray, shape (n,)
        Samples used, finite unless ``index`` is the whole run.
    index : ndarray, shape (n,)
        Their sample numbers, rising, from 0.
    length : int
        Samples on the record's grid.
    turns : ndarray, shape (n_lines,)
        Phase of each line per sample [rad].
    pieces : int
        Pieces of the drift; 0 for a constant.
    clock : bool
        Whether the lines' common relative frequency error is a parameter.
    """

    def __init__(
        self,
        values: NDArray[np.float64],
        index: NDArray[np.int64],
        length: int,
        turns: NDArray[np.float64],
        pieces: int,
        *,
        clock: bool = False,
    ) -> None:
        self.values, self.index, self.length = values, index, length
        self.turns, self.pieces, self.clock = turns, pieces, clock
        self.centre = (length - 1) / 2.0
        self.n_lines = len(turns)
        self.fixed = 2 + 2 * self.n_lines + int(clock)
        self.size = self.fixed + spline_size(pieces)
        self._cache: dict[int, NDArray[np.float64]] = {}
        self._kept: dict[tuple[int, int], tuple[NDArray[np.float64], tuple[int, int]]] = {}

    def chunks(self, lead: int = 0) -> list[tuple[int, int]]:
        """Return chunks of the record.

        Parameters
        ----------
        lead : int, optional
            Samples by which each begins early.

        Returns
        -------
        list of tuple
            (start, stop) of each.
        """
        n = len(self.values)
        size = _CHUNK
        if self.pieces > 8:  # few pieces a chunk keep the matrices small
            size = max(min(size, 2 * n // self.pieces), 256)
        return [(max(s - lead, 0), min(s + size, n)) for s in range(0, n, size)]

    def _carriers(self, start: int, stop: int, stretch: float) -> NDArray[np.float64]:
        """Return cos and −sin of every line, columns in pairs."""
        key = start if self.n_lines * len(self.values) <= _CACHE_CELLS and stretch == 0.0 else -1
        if key in self._cache and len(self._cache[key]) == stop - start:
            return self._cache[key]
        time = self.index[start:stop] - self.centre
        angle = np.outer(time, self.turns * (1.0 + stretch))
        columns = np.empty((stop - start, 2 * self.n_lines))
        columns[:, 0::2] = np.cos(angle)
        columns[:, 1::2] = -np.sin(angle)
        if key >= 0:
            self._cache[key] = columns
        return columns

    def _weights(self, start: int, stop: int) -> tuple[NDArray[np.float64], tuple[int, int]]:
        """Return the spline's weights and their columns, kept where the record is not long."""
        kept = self._kept.get((start, stop))
        if kept is not None:
            return kept
        position = self.index[start:stop] / max(self.length - 1, 1)
        span = spline_span(float(position[0]), float(position[-1]), self.pieces)
        weights = spline_weights(position, self.pieces, span)
        if 8 * len(self.values) <= _CACHE_CELLS:
            self._kept[start, stop] = weights, span
        return weights, span

    def _angles(
        self, theta: NDArray[np.float64], start: int, stop: int
    ) -> tuple[NDArray[np.float64], NDArray[np.float64], NDArray[np.float64], tuple[int, int]]:
        """Return the phase Φ, the carriers, the spline's weights and its columns."""
        stretch = float(theta[self.fixed - 1]) if self.clock else 0.0
        carriers = self._carriers(start, stop, stretch)
        weights, span = self._weights(start, stop)
        drift = theta[self.fixed + span[0] : self.fixed + span[1]]
        phase = carriers @ theta[2 : 2 + 2 * self.n_lines] + weights @ drift
        return phase, carriers, weights, span

    def residual(self, theta: NDArray[np.float64], start: int, stop: int) -> NDArray[np.float64]:
        """Return data minus model.

        Parameters
        ----------
        theta : ndarray, shape (n_parameters,)
            Parameters.
        start, stop : int
            First sample and one past the last.

        Returns
        -------
        ndarray, shape (stop - start,)
            Residuals in the record's unit, NaN where samples are missing.
        """
        phase = self._angles(theta, start, stop)[0]
        return np.asarray(self.values[start:stop] - theta[0] - theta[1] * np.cos(phase))

    def drift(
        self, theta: NDArray[np.float64], position: NDArray[np.float64]
    ) -> NDArray[np.float64]:
        """Return the slow phase.

        Parameters
        ----------
        theta : ndarray, shape (n_parameters,)
            Parameters.
        position : ndarray, shape (n,)
            From 0 at the first sample to 1 at the last.

        Returns
        -------
        ndarray, shape (n,)
            φ [rad].
        """
        columns = (0, spline_size(self.pieces))
        return np.asarray(spline_weights(position, self.pieces, columns) @ theta[self.fixed :])

    def squares(self, theta: NDArray[np.float64]) -> float:
        """Return the sum of squared residuals.

        Parameters
        ----------
        theta : ndarray, shape (n_parameters,)
            Parameters.

        Returns
        -------
        float
            Σ r² over the samples there are.
        """
        total = 0.0
        for start, stop in self.chunks():
            rest = self.residual(theta, start, stop)
            total += float(np.nansum(rest * rest))
        return total

    def rows(
        self, theta: NDArray[np.float64], start: int, stop: int
    ) -> tuple[NDArray[np.float64], NDArray[np.float64], NDArray[np.int64]]:
        """Return residuals and their derivatives.

        Parameters
        ----------
        theta : ndarray, shape (n_parameters,)
            Parameters.
        start, stop : int
            First sample and one past the last.

        Returns
        -------
        tuple of ndarray
            Residuals (n,), derivatives (n, k), and the k parameters they belong to.
        """
        phase, carriers, weights, span = self._angles(theta, start, stop)
        cosine, sine = np.cos(phase), np.sin(phase)
        rest = self.values[start:stop] - theta[0] - theta[1] * cosine
        slope = -theta[1] * sine
        parts = np.empty((len(rest), self.fixed + weights.shape[1]))
        parts[:, 0] = 1.0
        parts[:, 1] = cosine
        parts[:, 2 : 2 + 2 * self.n_lines] = carriers * slope[:, None]
        if self.clock:
            phasors = theta[2 : 2 + 2 * self.n_lines]
            swing = np.zeros(len(rest))
            for line, turn in enumerate(self.turns.tolist()):
                a, b = phasors[2 * line], phasors[2 * line + 1]
                swing += turn * (a * carriers[:, 2 * line + 1] - b * carriers[:, 2 * line])
            parts[:, self.fixed - 1] = slope * swing * (self.index[start:stop] - self.centre)
        parts[:, self.fixed :] = weights * slope[:, None]
        where = np.concatenate(
            [np.arange(self.fixed), np.arange(self.fixed + span[0], self.fixed + span[1])]
        )
        missing = ~np.isfinite(rest)
        if missing.any():
            parts[missing] = np.nan
        return rest, parts, where

    def sums(
        self,
        theta: NDArray[np.float64],
        whitening: NDArray[np.float64] | None = None,
        *,
        scatter: bool = False,
    ) -> Sums:
        """Return the sums of the normal equations.

        Parameters
        ----------
        theta : ndarray, shape (n_parameters,)
            Parameters.
        whitening : ndarray, shape (order + 1,), optional
            Prediction-error filter, first weight 1, for residuals and derivatives alike. Samples
            within its reach of a gap are left out.
        scatter : bool, optional
            Whether Σ j jᵀ r² is wanted.

        Returns
        -------
        Sums
            Over the whole record.
        """
        lead = 0 if whitening is None else len(whitening) - 1
        total = Sums(
            np.zeros((self.size, self.size)),
            np.zeros(self.size),
            np.zeros((self.size, self.size)),
            0.0,
            0,
        )
        for start, stop in self.chunks(lead):
            rest, parts, where = self.rows(theta, start, stop)
            if whitening is not None and lead:
                rest = filtered(rest[:, None], whitening)[:, 0]
                parts = filtered(parts, whitening)
            good = np.isfinite(rest)
            if not good.all():
                rest, parts = rest[good], parts[good]
            place = np.ix_(where, where)
            total.matrix[place] += parts.T @ parts
            total.gradient[where] += parts.T @ rest
            if scatter:
                weighted = parts * rest[:, None]
                total.scatter[place] += weighted.T @ weighted
            total.squares += float(rest @ rest)
            total.count += len(rest)
        return total


def filtered(columns: NDArray[np.float64], weights: NDArray[np.float64]) -> NDArray[np.float64]:
    """Return the columns after a prediction-error filter.

    Parameters
    ----------
    columns : ndarray, shape (n, k)
        Side by side.
    weights : ndarray, shape (order + 1,)
        The filter, first weight 1.

    Returns
    -------
    ndarray, shape (n - order, k)
        Shorter by its order.
    """
    order = len(weights) - 1
    out = columns[order:].copy()
    for lag in range(1, order + 1):
        out += weights[lag] * columns[order - lag : len(columns) - lag]
    return out
