"""The shape of a line: what its harmonics say of where the mirror turns and how deep it goes."""

import math
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from calibration.bessel_table import bessel_rows, bessel_table
from calibration.harmonic_blocks import HarmonicBlocks

__all__ = ["LineShape", "likely_motions"]

_SHALLOW = np.geomspace(0.008, 6.0, 72)
_TURN = np.linspace(-np.pi, np.pi, 96, endpoint=False)
_HIGHEST = 420


@dataclass(frozen=True)
class LineShape:
    """A line's harmonics turned to real numbers.

    Attributes
    ----------
    phase : float
        Phase of the line about the record's middle, modulo π [rad].
    even, odd : ndarray, shape (n_blocks, n)
        Harmonics 2, 4, … as a·cos φ·J_k and 1, 3, … as a·sin φ·J_k, in the record's unit.
    """

    phase: float
    even: NDArray[np.float64]
    odd: NDArray[np.float64]


def _turning_phases(harmonics: NDArray[np.complex128]) -> list[float]:
    """Return the line phases, modulo π, about which the record is most nearly symmetric in time."""
    highest = harmonics.shape[1]
    size = 1 << math.ceil(math.log2(32 * highest + 64))
    weights = np.zeros(size, dtype=np.complex128)
    weights[1 : highest + 1] = np.sum(harmonics**2, axis=0)
    course = np.fft.fft(weights).real  # at ψ = π·i/size
    peak = (course >= np.roll(course, 1)) & (course > np.roll(course, -1))
    peak &= course > 0.3 * course.max()
    places = np.flatnonzero(peak)
    best = places[np.argsort(-course[places])][:3]
    return [float(np.pi * place / size) for place in best]


def _lined_up(harmonics: NDArray[np.complex128], phase: float) -> LineShape:
    """Return the harmonics as real numbers for one line phase."""
    order = np.arange(1, harmonics.shape[1] + 1)
    real = (harmonics * np.exp(-1j * order * phase)).real / 2.0
    sign = np.array([1.0, -1.0, -1.0, 1.0])[order % 4]
    real = real * sign
    return LineShape(phase, real[:, 1::2], real[:, 0::2])


def _depths_by_shape(line: LineShape, deepest: float) -> list[tuple[float, float]]:
    """Return (cost, depth) of the depths whose Bessel functions the harmonics follow best."""
    highest = line.even.shape[1] + line.odd.shape[1]
    depths, table = bessel_table(330, _HIGHEST)
    count = int(np.searchsorted(depths, deepest))
    table = table[: max(count, 1), 1 : highest + 1]
    cost = np.zeros(len(table))
    for part, rows in ((line.even, table[:, 1::2]), (line.odd, table[:, 0::2])):
        if not part.size:
            continue
        share = np.einsum("bk,bl->kl", part, part)
        along = np.einsum("mk,mk->m", rows @ share, rows)
        cost += np.trace(share) - along / np.maximum(np.sum(rows**2, axis=1), 1e-30)
    inner = np.concatenate([[np.inf], cost, [np.inf]])
    places = np.flatnonzero((cost <= inner[:-2]) & (cost < inner[2:]))
    places = places[np.argsort(cost[places])][:4]
    return [(float(cost[i]), float(depths[i])) for i in places]


def _phase_cost(
    blocks: HarmonicBlocks, line: LineShape, offset: float, reach: float, rows: NDArray[np.float64]
) -> NDArray[np.float64]:
    """Return the squared misfit for each (depth, working phase, block)."""
    evens, odds = min(line.even.shape[1], 2), min(line.odd.shape[1], 2)
    cosine, sine = np.cos(_TURN), np.sin(_TURN)
    model = [rows[:, :1] * cosine]
    data = [blocks.window_mean - offset]
    weight = [1.0]
    for k in range(evens):
        model.append(rows[:, 2 * k + 2 : 2 * k + 3] * cosine)
        data.append(line.even[:, k])
        weight.append(2.0)
    for k in range(odds):
        model.append(rows[:, 2 * k + 1 : 2 * k + 2] * sine)
        data.append(line.odd[:, k])
        weight.append(2.0)
    wide = np.stack(model, axis=-1) * reach  # (depth, phase, quantity)
    seen = np.stack(data, axis=-1)  # (block, quantity)
    heavy = np.array(weight)
    square = np.sum(heavy * wide**2, axis=-1)[:, :, None]
    cross = np.einsum("mpq,bq->mpb", wide * heavy, seen)
    return np.asarray(square - 2.0 * cross + np.sum(heavy * seen**2, axis=-1))


def _depths_by_extremes(
    blocks: HarmonicBlocks, line: LineShape, offset: float, half_span: float
) -> list[tuple[float, float]]:
    """Return (cost, depth) of the depths that agree with mean, harmonics and known extremes."""
    thin = slice(None, None, max(len(blocks.middle) // 48, 1))
    few = HarmonicBlocks(blocks.values[thin], blocks.window_mean[thin], blocks.middle[thin])
    part = LineShape(line.phase, line.even[thin], line.odd[thin])
    rows = bessel_rows(_SHALLOW, 4)
    cost = _phase_cost(few, part, offset, half_span, rows).min(axis=1).sum(axis=1)
    inner = np.concatenate([[np.inf], cost, [np.inf]])
    places = np.flatnonzero((cost <= inner[:-2]) & (cost < inner[2:]))
    places = places[np.argsort(cost[places])][:3]
    return [(float(cost[i]), float(_SHALLOW[i])) for i in places]


def likely_motions(
    blocks: HarmonicBlocks,
    harmonics: NDArray[np.complex128],
    deepest: float,
    extremes: tuple[float, float],
) -> list[tuple[LineShape, float]]:
    """Return the likely motions of one line.

    Parameters
    ----------
    blocks : HarmonicBlocks
        The record.
    harmonics : ndarray, shape (n_blocks, n_harmonics)
        The line's complex harmonics in every block.
    deepest : float
        Greatest depth to look at [rad].
    extremes : tuple of float
        Middle and half span of the fringe, known or guessed.

    Returns
    -------
    list of tuple
        (shape, depth [rad]), first by the harmonics alone, then by mean and extremes.
    """
    found: list[tuple[float, LineShape, float]] = []
    tied: list[tuple[float, LineShape, float]] = []
    for phase in _turning_phases(harmonics):
        line = _lined_up(harmonics, phase)
        found += [(cost, line, depth) for cost, depth in _depths_by_shape(line, deepest)]
        tied += [
            (cost, line, depth)
            for cost, depth in _depths_by_extremes(blocks, line, extremes[0], extremes[1])
        ]
    found.sort(key=lambda item: item[0])
    tied.sort(key=lambda item: item[0])
    return [(line, depth) for _, line, depth in found[:3] + tied[:2]]
