"""Start values of a driven fringe: depths, line phases, working point and extremes.

Each line's harmonics say where the mirror turns (the record is symmetric in time about that moment,
whatever the working point), then how deep it goes (the harmonics follow J_k), and block by block what
the working point was. Shallow lines have no harmonics to speak of: there the extremes, given or
guessed, tie the first harmonic to the mean.
"""

import itertools
import math
from dataclasses import dataclass, replace

import numpy as np
from numpy.typing import NDArray

from calibration.bessel_table import bessel_rows
from calibration.harmonic_blocks import HarmonicBlocks, lay_blocks
from calibration.line_shape import LineShape, likely_motions
from calibration.record_band import highest_turn, thinned
from calibration.tone_chain import chain_tones, working_by_regression

__all__ = ["FringeStart", "find_starts"]

_HIGHEST = 420


@dataclass(frozen=True)
class FringeStart:
    """One set of start values.

    Attributes
    ----------
    offset, half_span : float
        Middle and half span of the fringe, in the record's unit.
    phasors : ndarray, shape (n_lines,)
        Complex phase amplitudes about the record's middle [rad].
    middle : ndarray, shape (n_blocks,)
        Sample index of each block's middle.
    working : ndarray, shape (n_blocks,)
        Working phase in each block, unwrapped [rad].
    """

    offset: float
    half_span: float
    phasors: NDArray[np.complex128]
    middle: NDArray[np.float64]
    working: NDArray[np.float64]


def _working(
    blocks: HarmonicBlocks,
    lines: list[LineShape],
    depths: list[float],
    offset: float | None,
    half_span: float | None,
) -> tuple[float, float, NDArray[np.float64]] | None:
    """Return offset, half span and the working phase of each block for given depths."""
    nulls = [float(row[0]) for row in bessel_rows(np.array(depths), 0)]
    top = np.zeros((len(blocks.middle), 2))  # Σ data·model for cos and sin
    norm = np.zeros(2)
    for place, (line, depth) in enumerate(zip(lines, depths, strict=True)):
        others = math.prod(nulls[:place] + nulls[place + 1 :])
        highest = line.even.shape[1] + line.odd.shape[1]
        row = bessel_rows(np.array([depth]), highest)[0] * others
        even, odd = row[2 : highest + 1 : 2], row[1 : highest + 1 : 2]
        top[:, 0] += 2.0 * line.even @ even
        top[:, 1] += 2.0 * line.odd @ odd
        norm += 2.0 * np.array([even @ even, odd @ odd])
    base = math.prod(nulls)
    if offset is not None:
        top[:, 0] += (blocks.window_mean - offset) * base
        norm[0] += base**2
    if norm.min() <= 0.0:
        return None
    cosine, sine = (top / norm).T
    if half_span is None or offset is None:
        size = np.hypot(cosine, sine)
        half_span = float(np.median(size))
        offset = float(np.median(blocks.window_mean - cosine * base))
    elif norm[1] < 0.02:  # a shallow line's sine is noisy: its size follows from the cosine
        cosine = np.clip(cosine, -half_span, half_span)
        sine = np.sign(_steady(sine)) * np.sqrt(half_span**2 - cosine**2)
    if not half_span > 0.0:
        return None
    return offset, half_span, np.unwrap(np.arctan2(sine, cosine))


def _steady(sine: NDArray[np.float64]) -> NDArray[np.float64]:
    """Return the sine averaged over neighbouring blocks, whose sign then is that of the slope."""
    if len(sine) < 5:
        return np.where(sine == 0.0, 1.0, sine)
    padded = np.pad(sine, 1, mode="edge")
    mean = padded[:-2] + padded[1:-1] + padded[2:]
    return np.where(mean == 0.0, 1.0, mean)


def _signed(lines: list[LineShape], depths: list[float]) -> list[complex]:
    """Return the phasors, each line's sign against the first by their common sin φ."""
    sines = []
    for line, depth in zip(lines, depths, strict=True):
        highest = line.even.shape[1] + line.odd.shape[1]
        row = bessel_rows(np.array([depth]), highest)[0][1 : highest + 1 : 2]
        sines.append(line.odd @ row)
    lead = max(sines, key=lambda sine: float(sine @ sine))
    return [
        depth
        * complex(math.cos(line.phase), math.sin(line.phase))
        * (-1.0 if float(lead @ sine) < 0.0 else 1.0)
        for line, depth, sine in zip(lines, depths, sines, strict=True)
    ]


def _guessed_extremes(values: NDArray[np.float64]) -> tuple[float, float]:
    """Return a rough middle and half span of a record that sees whole fringes."""
    good = values[np.isfinite(values)]
    low, high = np.quantile(good, [0.01, 0.99])
    return float(high + low) / 2.0, max(float(high - low) / 2.0, 1e-300)


def find_starts(
    values: NDArray[np.float64],
    turns: NDArray[np.float64],
    low: float | None,
    high: float | None,
    periods: float = 40.0,
) -> list[FringeStart]:
    """Find start values for a driven fringe.

    Parameters
    ----------
    values : ndarray, shape (n,)
        Record; NaN where samples are missing.
    turns : ndarray, shape (n_lines,)
        Phase of each line per sample [rad], between 0 and π.
    low, high : float or None
        Extremes of the fringe where known, in the record's unit.
    periods : float, optional
        Most periods of the lowest line over which the working point is taken to stay.

    Returns
    -------
    list of FringeStart
        Most likely first, at most 48.
    """
    reach = highest_turn(values)
    few, many = thinned(values, reach)
    if many == 1:
        return _starts(values, turns, low, high, periods, reach)
    # the same moment is the middle of both
    late = np.exp(0.5j * turns * (len(values) - many * len(few)))
    return [
        replace(
            start,
            phasors=start.phasors * late,
            middle=start.middle * many + (many - 1) / 2.0,
        )
        for start in _starts(few, turns * many, low, high, periods, reach * many)
    ]


def _starts(
    values: NDArray[np.float64],
    turns: NDArray[np.float64],
    low: float | None,
    high: float | None,
    periods: float,
    reach: float,
) -> list[FringeStart]:
    """Find start values from harmonics up to the highest frequency of the record."""
    period = 2.0 * np.pi / float(turns.min())
    apart = min([abs(a - b) for a, b in itertools.combinations(turns.tolist(), 2)], default=np.inf)
    blocks = lay_blocks(values, max(3.0 * period, 3.0 * 2.0 * np.pi / apart), period, periods)
    centre = (len(values) - 1) / 2.0
    known = None
    if low is not None and high is not None:
        known = ((high + low) / 2.0, (high - low) / 2.0)
    extremes = known or _guessed_extremes(values)
    options = []
    for turn in turns.tolist():
        highest = min(max(int(np.pi / turn * 0.96), 1), _HIGHEST)
        harmonics = blocks.harmonics(turn, centre, highest)
        options.append(likely_motions(blocks, harmonics, min(0.95 * np.pi / turn, 330.0), extremes))
    starts: list[FringeStart] = []
    if len(turns) > 1:
        long = lay_blocks(
            values, max(blocks.values.shape[1], min(len(values) / 4.0, 16384.0)), period
        )
        for laid in (long, blocks):  # long ones tell mixed tones apart, short ones follow a drift
            starts += _from_chains(laid, turns, centre, reach, options, known)
    for choice in _choices(options):
        starts += _from_choice(blocks, choice, known, extremes)
    return starts[:48]


def _from_chains(
    blocks: HarmonicBlocks,
    turns: NDArray[np.float64],
    centre: float,
    reach: float,
    options: list[list[tuple[LineShape, float]]],
    known: tuple[float, float] | None,
) -> list[FringeStart]:
    """Return starts for several deep lines, found one after another."""
    first = [
        (place, complex(depth * np.exp(1j * line.phase)))
        for place, own in enumerate(options)
        for line, depth in own[:4]
        if depth > 0.7
    ]
    out = []
    for chain in chain_tones(blocks, turns, centre, first, reach) if first else []:
        offset, half_span, working = working_by_regression(blocks, turns, centre, chain.phasors)
        offset, half_span = known or (offset, half_span)
        out.append(FringeStart(offset, half_span, chain.phasors, blocks.middle, working))
    return out


def _choices(options: list[list[tuple[LineShape, float]]]) -> list[list[tuple[LineShape, float]]]:
    """Return what to try: all lines together, and each line alone with the others still at rest.

    From rest the search finds shallow lines by itself, once a deep one is described.
    """
    keep = {1: 8, 2: 4, 3: 3}.get(len(options), 2 if len(options) < 5 else 1)
    together = [o[:keep] for o in options]
    choices = []
    if len(options) > 1:
        for place, own in enumerate(options):
            rest = [(o[0][0], 0.0) for o in options]
            choices += [[*rest[:place], option, *rest[place + 1 :]] for option in own[:4]]
    return choices + [list(c) for c in itertools.islice(itertools.product(*together), 27)]


def _from_choice(
    blocks: HarmonicBlocks,
    choice: list[tuple[LineShape, float]],
    known: tuple[float, float] | None,
    extremes: tuple[float, float],
) -> list[FringeStart]:
    """Return the starts that one choice of phases and depths allows."""
    lines, depths = [line for line, _ in choice], [depth for _, depth in choice]
    phasors = np.array(_signed(lines, depths))
    tries: list[tuple[float | None, float | None]] = [extremes]
    if known is None and max(depths) > 0.7:
        tries.insert(0, (None, None))
    out = []
    for offset, half_span in tries:
        got = _working(blocks, lines, depths, offset, half_span)
        if got is not None:
            out.append(FringeStart(got[0], got[1], phasors, blocks.middle, got[2]))
    return out
