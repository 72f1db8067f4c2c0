"""The chain of tones: several deep lines found one after another.

Once one line's motion is known, multiplying the record by e^{−iθ} takes it out of one half of the light:
cos(φ + θ₁ + θ₂) leaves ½e^{i(φ + θ₂)}, a clean comb of the next line's harmonics whose size no other
line lessens. So each line is found in what the lines before it have left.
"""

import math
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from calibration.bessel_table import bessel_table
from calibration.harmonic_blocks import HarmonicBlocks

__all__ = ["Chain", "chain_tones", "working_by_regression"]

_HIGHEST = 200
_BEAM = 6
_ROUNDS = 3
_MOST_CELLS = 4_000_000


@dataclass(frozen=True)
class Chain:
    """Lines found so far.

    Attributes
    ----------
    phasors : ndarray, shape (n_lines,)
        Complex depths [rad], 0 for a line not yet found.
    found : tuple of int
        The lines found, in order.
    score : float
        Share of the light that their motion explains.
    """

    phasors: NDArray[np.complex128]
    found: tuple[int, ...]
    score: float


def _angles(
    blocks: HarmonicBlocks,
    turns: NDArray[np.float64],
    centre: float,
    phasors: NDArray[np.complex128],
) -> NDArray[np.float64]:
    """Return Σ Re z e^{iωt} in every block, shape (n_blocks, length)."""
    length = blocks.values.shape[1]
    time = blocks.middle[:, None] - centre + np.arange(length) - length / 2.0
    total = np.zeros_like(time)
    for turn, phasor in zip(turns.tolist(), phasors.tolist(), strict=True):
        if phasor:
            total += abs(phasor) * np.cos(turn * time + math.atan2(phasor.imag, phasor.real))
    return np.asarray(total)


def _comb(
    left: NDArray[np.complex128], middle: NDArray[np.float64], turn: float, highest: int
) -> NDArray[np.complex128]:
    """Return the harmonics −highest … highest of a complex record in every block."""
    length = left.shape[1]
    order = np.arange(-highest, highest + 1)
    carriers = np.ones((len(order), length), dtype=np.complex128)
    first = np.exp(-1j * turn * (np.arange(length) - length / 2.0))
    for k in range(1, highest + 1):  # powers of the first cost a tenth of as many exponentials
        np.multiply(carriers[highest + k - 1], first, out=carriers[highest + k])
        np.conj(carriers[highest + k], out=carriers[highest - k])
    return np.asarray(left @ carriers.T / length * np.exp(-1j * turn * np.outer(middle, order)))


def _highest(turn: float, reach: float) -> int:
    """Return the highest harmonic of a line that is looked at."""
    return min(max(int(np.pi / turn * 0.96), 1), int(1.3 * reach / turn) + 8, _HIGHEST)


def _options(comb: NDArray[np.complex128], deepest: float) -> list[tuple[float, complex]]:
    """Return (explained power, phasor) of the motions that a comb looks like, best first."""
    highest = comb.shape[1] // 2
    order = np.arange(-highest, highest + 1)
    size = 1 << math.ceil(math.log2(32 * highest + 64))
    weights = np.zeros(size, dtype=np.complex128)
    up, down = comb[:, highest + 1 :], comb[:, :highest][:, ::-1]
    weights[1 : highest + 1] = np.sum(up * down.conj(), axis=0)
    course = np.fft.fft(weights).real
    phase = np.pi * int(np.argmax(course)) / size
    depths, table = bessel_table(330, 420)
    count = max(int(np.searchsorted(depths, deepest)), 1)
    positive = table[:count, : highest + 1]
    sign = np.where(np.arange(1, highest + 1) % 2 == 0, 1.0, -1.0)
    rows = np.hstack([positive[:, :0:-1] * sign[::-1], positive])
    unit = np.array([1, -1j, -1, 1j])[order % 4]  # conj of i^l
    out: list[tuple[float, complex]] = []
    for turned in (phase, phase + np.pi):
        straight = comb * unit * np.exp(-1j * order * turned)
        power = np.sum(np.abs(rows @ straight.T) ** 2, axis=1) / np.sum(rows**2, axis=1)
        inner = np.concatenate([[-np.inf], power, [-np.inf]])
        places = np.flatnonzero((power >= inner[:-2]) & (power > inner[2:]))
        out += [
            (float(power[place]), complex(depths[place] * np.exp(1j * turned)))
            for place in places[np.argsort(-power[places])][:2].tolist()
        ]
    return sorted(out, key=lambda item: -item[0])[:3]


def _next(
    blocks: HarmonicBlocks,
    turns: NDArray[np.float64],
    centre: float,
    chain: Chain,
    reach: float,
) -> list[Chain]:
    """Return the chain with one more line, in the likeliest ways."""
    window = blocks.values - blocks.window_mean[:, None] * _window(blocks)
    left = window * np.exp(-1j * _angles(blocks, turns, centre, chain.phasors))
    out: list[Chain] = []
    for line, turn in enumerate(turns.tolist()):
        if line in chain.found:
            continue
        comb = _comb(left, blocks.middle - centre, turn, _highest(turn, reach))
        for power, phasor in _options(comb, min(0.95 * np.pi / turn, float(_HIGHEST))):
            phasors = chain.phasors.copy()
            phasors[line] = phasor
            out.append(Chain(phasors, (*chain.found, line), power))
    return out


def _window(blocks: HarmonicBlocks) -> NDArray[np.float64]:
    length = blocks.values.shape[1]
    return np.asarray(1.0 - np.cos(2.0 * np.pi * np.arange(length) / length))


def chain_tones(
    blocks: HarmonicBlocks,
    turns: NDArray[np.float64],
    centre: float,
    first: list[tuple[int, complex]],
    reach: float = math.pi,
) -> list[Chain]:
    """Find all lines one after another, from several guesses of the first.

    Parameters
    ----------
    blocks : HarmonicBlocks
        The record; every second one is used where they are many.
    turns : ndarray, shape (n_lines,)
        Phase of each line per sample [rad].
    centre : float
        Sample index at which phases count as zero.
    first : list of tuple
        Guesses (line, phasor) to begin with.
    reach : float, optional
        Highest frequency of the record, as phase per sample [rad].

    Returns
    -------
    list of Chain
        At most six, the best first.
    """
    step = max(math.ceil(blocks.values.size / _MOST_CELLS), len(blocks.middle) // 24, 1)
    thin = slice(None, None, step)
    few = HarmonicBlocks(blocks.values[thin], blocks.window_mean[thin], blocks.middle[thin])
    beam = []
    for line, phasor in first:
        phasors = np.zeros(len(turns), dtype=np.complex128)
        phasors[line] = phasor
        beam.append(Chain(phasors, (line,), 0.0))
    for _ in range(len(turns) - 1):
        longer = [chain for known in beam for chain in _next(few, turns, centre, known, reach)]
        longer.sort(key=lambda chain: -chain.score)
        beam = _different(longer)[:_BEAM]
    again = [_again(few, turns, centre, chain, reach) for chain in beam]
    again.sort(key=lambda chain: -chain.score)
    return _different(again)


def _again(
    blocks: HarmonicBlocks,
    turns: NDArray[np.float64],
    centre: float,
    chain: Chain,
    reach: float,
) -> Chain:
    """Return the chain with every line found again in what all the others leave."""
    for _ in range(_ROUNDS):
        before = chain.score
        for line in chain.found:
            phasors = chain.phasors.copy()
            phasors[line] = 0.0
            others = tuple(other for other in chain.found if other != line)
            best = _next(blocks, turns, centre, Chain(phasors, others, 0.0), reach)
            chain = max([chain, *best], key=lambda one: one.score)
        if chain.score < 1.001 * before:
            break
    return chain


def _different(chains: list[Chain]) -> list[Chain]:
    """Return the chains without those that are nearly one that came before."""
    out: list[Chain] = []
    for chain in chains:
        if not any(np.allclose(chain.phasors, other.phasors, atol=0.2) for other in out):
            out.append(chain)
    return out


def working_by_regression(
    blocks: HarmonicBlocks,
    turns: NDArray[np.float64],
    centre: float,
    phasors: NDArray[np.complex128],
) -> tuple[float, float, NDArray[np.float64]]:
    """Return offset, half span and each block's working phase for known motion.

    Parameters
    ----------
    blocks : HarmonicBlocks
        The record.
    turns : ndarray, shape (n_lines,)
        Phase of each line per sample [rad].
    centre : float
        Sample index at which phases count as zero.
    phasors : ndarray, shape (n_lines,)
        Complex depths [rad].

    Returns
    -------
    offset, half_span : float
        In the record's unit.
    working : ndarray, shape (n_blocks,)
        Phases, unwrapped [rad].
    """
    angle = _angles(blocks, turns, centre, phasors)
    window = _window(blocks)
    columns = np.stack([np.ones_like(angle), np.cos(angle), np.sin(angle)], axis=2)
    matrix = np.einsum("bti,t,btj->bij", columns, window, columns)
    right = np.einsum("bti,bt->bi", columns, blocks.values)
    matrix += 1e-9 * np.trace(matrix, axis1=1, axis2=2)[:, None, None] * np.eye(3)
    solved = np.linalg.solve(matrix, right[:, :, None])[:, :, 0]
    working = np.unwrap(np.arctan2(-solved[:, 2], solved[:, 1]))
    half_span = float(np.median(np.hypot(solved[:, 1], solved[:, 2])))
    return float(np.median(solved[:, 0])), max(half_span, 1e-300), working
