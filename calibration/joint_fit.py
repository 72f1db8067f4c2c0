"""Joint least squares of lines and drift over block phasors, exact with gaps.

The unknowns are one complex coefficient for each regressor, a carrier times a weight that varies from
block to block, and one real coefficient for each drift function. The normal equations come from
products over blocks; a sample that is missing takes its own row out of them.
"""

from collections.abc import Iterator
from dataclasses import dataclass
from functools import lru_cache

import numpy as np
from numpy.polynomial import legendre
from numpy.typing import NDArray

from calibration.phasors import LONGEST_PRODUCT, BlockPhasors, block_waves, start_phases
from calibration.tall_product import tall_product

__all__ = [
    "JointFit",
    "Regressors",
    "drift_functions",
    "fit_jointly",
    "real_map",
    "residual_phasors",
]

_MISSING_CHUNK = 1 << 15  # rows of the table of regressors at missing samples held at a time


@dataclass(frozen=True, slots=True)
class Regressors:
    """What is fitted: lines with weights over the blocks, and drift.

    Parameters
    ----------
    carrier : ndarray of int, shape (n_regressors,)
        Which carrier of the phasors each regressor is.
    weights : ndarray of complex, shape (n_blocks, n_regressors)
        Factor of the carrier in each block.
    slopes : ndarray of complex, shape (n_blocks, n_regressors), optional
        Change of the factor over the block; needs phasors with slopes.
    drift : ndarray, shape (n_blocks, n_drift, 2)
        Value at the middle of each block and change over the block of each drift function.
    """

    carrier: NDArray[np.int64]
    weights: NDArray[np.complex128]
    slopes: NDArray[np.complex128] | None
    drift: NDArray[np.float64]

    @classmethod
    def steady(cls, phasors: BlockPhasors, drift: NDArray[np.float64]) -> "Regressors":
        """Return regressors for each carrier as it is, with a drift."""
        k = len(phasors.cycles)
        ones = np.ones((len(phasors.numbers), k), dtype=np.complex128)
        return cls(np.arange(k), ones, None, drift)

    def with_lines(
        self,
        carrier: NDArray[np.int64],
        weights: NDArray[np.complex128],
        slopes: NDArray[np.complex128] | None = None,
    ) -> "Regressors":
        """Return the regressors with further ones appended."""
        joined = None
        if slopes is not None or self.slopes is not None:
            own = np.zeros_like(self.weights) if self.slopes is None else self.slopes
            joined = np.hstack([own, np.zeros_like(weights) if slopes is None else slopes])
        return Regressors(
            np.concatenate([self.carrier, carrier]),
            np.hstack([self.weights, weights]),
            joined,
            self.drift,
        )


@dataclass(frozen=True, slots=True)
class JointFit:
    """The solution of the normal equations.

    Parameters
    ----------
    coefficients : ndarray of complex, shape (n_regressors,)
        A·e^(iφ) of each regressor.
    drift : ndarray, shape (n_drift,)
        Coefficients of the drift functions.
    solution : ndarray, shape (n_parameters,)
        The real parameters themselves.
    inverse : ndarray, shape (n_parameters, n_parameters)
        Inverse of the normal matrix: times the variance of a sample, the covariance.
    gram : ndarray, shape (2·n_regressors + n_drift, 2·n_regressors + n_drift)
        The normal matrix for real and imaginary parts and drift, before any map.
    """

    coefficients: NDArray[np.complex128]
    drift: NDArray[np.float64]
    solution: NDArray[np.float64]
    inverse: NDArray[np.float64]
    gram: NDArray[np.float64]


def drift_functions(phasors: BlockPhasors, order: int) -> NDArray[np.float64]:
    """Return Legendre polynomials over the recording, block by block.

    Parameters
    ----------
    phasors : BlockPhasors
        Whose blocks they are for.
    order : int
        Highest degree, 0 for an offset alone, −1 for none.

    Returns
    -------
    ndarray, shape (n_blocks, order + 1, 2)
        Value and change over each block.
    """
    middles = phasors.middles
    half = 0.5 * (middles[-1] - middles[0] + phasors.block)
    x = (middles - 0.5 * (middles[0] + middles[-1])) / half
    functions = np.zeros((len(x), order + 1, 2))
    for degree in range(order + 1):
        unit = np.eye(degree + 1)[degree]
        functions[:, degree, 0] = legendre.legval(x, unit)
        functions[:, degree, 1] = legendre.legval(x, legendre.legder(unit)) * phasors.block / half
    return functions


def real_map(effects: NDArray[np.complex128], drift: int) -> NDArray[np.float64]:
    """Return the map from real parameters to real parts, imaginary parts and drift.

    Parameters
    ----------
    effects : ndarray of complex, shape (n_parameters, n_regressors)
        What one unit of each parameter adds to the complex coefficients.
    drift : int
        Number of drift functions; each keeps its own parameter, after the others.

    Returns
    -------
    ndarray, shape (2·n_regressors + n_drift, n_parameters + n_drift)
        For :func:`fit_jointly`.
    """
    n, r = effects.shape
    table = np.zeros((2 * r + drift, n + drift))
    table[:r, :n], table[r : 2 * r, :n] = effects.real.T, effects.imag.T
    table[2 * r :, n:] = np.eye(drift)
    return table


def fit_jointly(
    phasors: BlockPhasors, regressors: Regressors, table: NDArray[np.float64] | None = None
) -> JointFit:
    """Solve for all regressors and drift functions at once.

    Parameters
    ----------
    phasors : BlockPhasors
        The recording.
    regressors : Regressors
        What is fitted.
    table : ndarray, optional
        From :func:`real_map`, where parameters are fewer than real and imaginary parts.

    Returns
    -------
    JointFit
        The least-squares solution with every sample weighted alike.
    """
    gram, moments = _normal_equations(phasors, regressors)
    full = gram
    if table is not None:
        gram, moments = table.T @ gram @ table, table.T @ moments
    scale = np.sqrt(np.where(np.diag(gram) > 0, np.diag(gram), 1.0))
    inverse = np.linalg.pinv(gram / np.outer(scale, scale), rcond=1e-12, hermitian=True)
    inverse /= np.outer(scale, scale)
    solution = inverse @ moments
    parameters = solution if table is None else table @ solution
    r = len(regressors.carrier)
    return JointFit(
        parameters[:r] + 1j * parameters[r : 2 * r],
        parameters[2 * r :],
        solution,
        inverse,
        full,
    )


def residual_phasors(
    phasors: BlockPhasors, regressors: Regressors, fit: JointFit
) -> NDArray[np.complex128]:
    """Return the phasors of what the fit leaves over.

    Parameters
    ----------
    phasors : BlockPhasors
        The recording.
    regressors : Regressors
        What was fitted.
    fit : JointFit
        The solution.

    Returns
    -------
    ndarray of complex, shape (n_blocks, n_carriers)
        Σ (y − fit)·e^(−2πi·cycles·n) over the samples used.
    """
    blocks = _Blocks.of(phasors, regressors)
    model = blocks.model_phasors(fit)
    parameters = np.concatenate([fit.coefficients.real, fit.coefficients.imag, fit.drift])
    for rows, sign, waves, table in blocks.exceptions():
        of_samples = (sign * (table @ parameters))[:, None] * np.conj(waves)
        first = np.flatnonzero(np.diff(rows, prepend=-1))
        model[rows[first]] += np.add.reduceat(of_samples, first)
    return np.asarray(phasors.sums - model)


def _normal_equations(
    phasors: BlockPhasors, regressors: Regressors
) -> tuple[NDArray[np.float64], NDArray[np.float64]]:
    blocks = _Blocks.of(phasors, regressors)
    gram = blocks.whole_gram()
    for _, sign, _, table in blocks.exceptions():
        gram += tall_product(sign[:, None] * table, table)
    values = (np.conj(regressors.weights) * phasors.sums[:, regressors.carrier]).sum(axis=0)
    if regressors.slopes is not None:
        if phasors.slopes is None:
            raise AssertionError("regressors with slopes need phasors with slopes")
        moments = phasors.slopes[:, regressors.carrier]
        values = values + (np.conj(regressors.slopes) * moments).sum(axis=0)
    drift = np.einsum("bjm,bm->j", regressors.drift, phasors.drift)
    return gram, np.concatenate([values.real, values.imag, drift])


def _block_turns(phasors: BlockPhasors) -> NDArray[np.complex128]:
    """Return the carriers at the start of each block, shape (n_blocks, n_carriers)."""
    return _turns(phasors.cycles.tobytes(), phasors.block, phasors.numbers.tobytes())


# A fit asks for the same tables several times over; they are small beside the recording.
@lru_cache(maxsize=8)
def _turns(cycles: bytes, block: int, numbers: bytes) -> NDArray[np.complex128]:
    starts = np.frombuffer(numbers, dtype=np.int64) * block
    return np.asarray(np.exp(1j * start_phases(np.frombuffer(cycles), starts)))


def _carrier_moments(
    phasors: BlockPhasors,
) -> tuple[NDArray[np.complex128], NDArray[np.complex128], NDArray[np.float64]]:
    """Return over one block, for p = 0, 1, 2: Σ u^p·e_k·e_l and Σ u^p·conj(e_k)·e_l, Σ u^p·e_k, Σ u^p."""
    return _moments(phasors.cycles.tobytes(), phasors.block)


@lru_cache(maxsize=8)
def _moments(
    cycles: bytes, block: int
) -> tuple[NDArray[np.complex128], NDArray[np.complex128], NDArray[np.float64]]:
    carriers = np.frombuffer(cycles)
    k = len(carriers)
    sums = np.zeros((2, 3, k, k), dtype=np.complex128)
    alone, powers = np.zeros((3, k), dtype=np.complex128), np.zeros(3)
    step = min(block, LONGEST_PRODUCT)
    own = np.conj(block_waves(carriers, step))
    for first in range(0, block, step):
        waves = own * np.exp(1j * start_phases(carriers, np.array([first])))
        u = (first + np.arange(step) - 0.5 * (block - 1)) / block
        for p, power in enumerate((np.ones_like(u), u, u * u)):
            weighted = power[:, None] * waves
            sums[0, p] += tall_product(waves, weighted)
            sums[1, p] += tall_product(np.conj(waves), weighted)
            alone[p] += weighted.sum(axis=0)
            powers[p] += power.sum()
    return sums, alone, powers


@lru_cache(maxsize=4)
def _exceptions(
    cycles: bytes, block: int, touched: bytes, bits: bytes
) -> tuple[NDArray[np.int64], NDArray[np.int64], NDArray[np.float64], NDArray[np.complex128]]:
    """Return block numbers, places in the block, signs and carriers of the samples to put right."""
    numbers = np.frombuffer(touched, dtype=np.int64)
    packed = np.frombuffer(bits, dtype=np.uint8).reshape(len(numbers), -1)
    used = np.unpackbits(packed, axis=1, count=block) != 0
    thin = 2 * used.sum(axis=1) < block
    place, offset = np.nonzero(used == thin[:, None])
    waves = np.exp(1j * start_phases(np.frombuffer(cycles), numbers[place] * block + offset))
    return numbers[place], offset, np.where(thin[place], 1.0, -1.0), waves


@dataclass(frozen=True, slots=True)
class _Blocks:
    """Regressors in block terms: in each, carriers from its start times value plus change·u."""

    phasors: BlockPhasors
    regressors: Regressors
    drift: NDArray[np.float64]
    factors: tuple[NDArray[np.complex128], ...]
    sums: NDArray[np.complex128]
    wave_moments: NDArray[np.complex128]
    drift_moments: NDArray[np.float64]

    @classmethod
    def of(cls, phasors: BlockPhasors, regressors: Regressors) -> "_Blocks":
        # Blocks that are mostly missing count sample by sample instead; see exceptions().
        kept = (2 * phasors.counts >= phasors.block)[:, None]
        turns = np.where(kept, _block_turns(phasors)[:, regressors.carrier], 0.0)
        factors = [turns * regressors.weights]
        if regressors.slopes is not None:
            factors.append(turns * regressors.slopes)
        drift = np.where(kept[:, :, None], regressors.drift, 0.0)
        return cls(phasors, regressors, drift, tuple(factors), *_carrier_moments(phasors))

    def whole_gram(self) -> NDArray[np.float64]:
        """Return the normal matrix of the blocks that are mostly there, as if they were full."""
        c = self.regressors.carrier
        alike = np.zeros((len(c), len(c)), dtype=np.complex128)
        mixed = np.zeros_like(alike)
        for p, left in enumerate(self.factors):
            for q, right in enumerate(self.factors):
                alike += tall_product(left, right) * self.sums[0, p + q][np.ix_(c, c)]
                mixed += tall_product(np.conj(left), right) * self.sums[1, p + q][np.ix_(c, c)]
        return self._real_gram(alike, mixed, self._drift_gram(), self._cross_gram())

    def _real_gram(
        self,
        alike: NDArray[np.complex128],
        mixed: NDArray[np.complex128],
        drift: NDArray[np.float64],
        cross: NDArray[np.complex128],
    ) -> NDArray[np.float64]:
        # y holds Re(q·g) = Re q·Re g − Im q·Im g, so the columns are Re g and −Im g.
        real = 0.5 * (mixed + alike).real
        imaginary = 0.5 * (mixed - alike).real
        between = -0.5 * (alike + mixed).imag
        return np.block(
            [
                [real, between, cross.real],
                [between.T, imaginary, -cross.imag],
                [cross.real.T, -cross.imag.T, drift],
            ]
        )

    def _drift_gram(self) -> NDArray[np.float64]:
        d = self.drift
        value, change = d[:, :, 0], d[:, :, 1]
        n0, n1, n2 = self.drift_moments
        mixed = tall_product(value, change)
        return np.asarray(
            n0 * (value.T @ value) + n1 * (mixed + mixed.T) + n2 * (change.T @ change)
        )

    def _cross_gram(self) -> NDArray[np.complex128]:
        d, c = self.drift, self.regressors.carrier
        total = np.zeros((len(c), d.shape[1]), dtype=np.complex128)
        for p, factor in enumerate(self.factors):
            for q in range(2):
                total += self.wave_moments[p + q][c, None] * (factor.T @ d[:, :, q])
        return total

    def model_phasors(self, fit: JointFit) -> NDArray[np.complex128]:
        """Return the phasors of the fitted model in the same blocks, as if they were full."""
        k = len(self.phasors.cycles)
        onto = np.zeros((len(self.regressors.carrier), k))
        onto[np.arange(len(onto)), self.regressors.carrier] = 1.0
        total = np.zeros((len(self.phasors.numbers), k), dtype=np.complex128)
        drift = np.einsum("bjm,j->bm", self.drift, fit.drift)
        for p, factor in enumerate(self.factors):
            amplitude = (factor * fit.coefficients) @ onto
            total += 0.5 * amplitude @ np.conj(self.sums[1, p])
            total += 0.5 * np.conj(amplitude) @ np.conj(self.sums[0, p])
        for q in range(2):
            total += drift[:, q, None] * np.conj(self.wave_moments[q])
        return np.asarray(total * np.conj(_block_turns(self.phasors)))

    def exceptions(
        self,
    ) -> Iterator[
        tuple[NDArray[np.int64], NDArray[np.float64], NDArray[np.complex128], NDArray[np.float64]]
    ]:
        """Yield block rows, signs, carriers and real regressors of samples to put right.

        In a block that is mostly there the missing samples are taken out again, sign −1; one that is
        mostly missing was left out as a whole, and its few samples are put in, sign 1.
        """
        phasors, block = self.phasors, self.phasors.block
        step = max(1, _MISSING_CHUNK // block)
        for at in range(0, len(phasors.touched), step):
            touched, bits = phasors.touched[at : at + step], phasors.masks[at : at + step]
            numbers, offset, sign, waves = _exceptions(
                phasors.cycles.tobytes(), block, touched.tobytes(), bits.tobytes()
            )
            row = np.searchsorted(phasors.numbers, numbers)
            if len(row):
                yield row, sign, waves, self._table(row, offset, waves)

    def _table(
        self, row: NDArray[np.int64], offset: NDArray[np.int64], waves: NDArray[np.complex128]
    ) -> NDArray[np.float64]:
        r = self.regressors
        u = ((offset - 0.5 * (self.phasors.block - 1)) / self.phasors.block)[:, None]
        factor = r.weights[row]
        if r.slopes is not None:
            factor = factor + r.slopes[row] * u
        g = waves[:, r.carrier] * factor
        drift = r.drift[row, :, 0] + r.drift[row, :, 1] * u
        return np.hstack([g.real, -g.imag, drift])
