"""Cubics fitted to the fringe's arcsine, as few as the converter's counts allow."""

import numpy as np
from numpy.typing import NDArray

from calibration.emit.coded_fringe import FM, CodedFringe
from calibration.emit.cubic_pieces import CubicPieces

__all__ = ["fit_pieces"]

FloatArray = NDArray[np.float64]

_PIECES_MAX = 256  # 4 KiB of a board's flash
_PART_OF_A_COUNT = 0.125
_GUARD_MAX = 8
_SUM_MAX = 2**30
_NODES = np.cos((2 * np.arange(4) + 1) * np.pi / 8)


def fit_pieces(fringe: CodedFringe) -> CubicPieces:
    """Return the fewest pieces whose interpolation is within an eighth of a count at mid-fringe.

    Parameters
    ----------
    fringe : CodedFringe
        What to convert.

    Returns
    -------
    CubicPieces
        At most 256 of them, the error then being what it is.
    """
    wanted_fm = _PART_OF_A_COUNT * fringe.metres_per_radian * FM / fringe.swing
    length = fringe.last - fringe.first + 1
    shift = max(1, (length // 8).bit_length())
    while shift > 1 and -(-length >> (shift - 1)) <= _PIECES_MAX:
        if _remainder_fm(fringe, shift) <= wanted_fm:
            break
        shift -= 1
    exact = _coefficients(fringe, shift)
    guard = _GUARD_MAX
    while guard > 0 and np.abs(exact).sum(axis=1).max() * 2.0**guard + 4 >= _SUM_MAX:
        guard -= 1
    table = np.rint(exact * 2.0**guard).astype(np.int64)
    return CubicPieces(fringe, shift, guard, table, _remainder_fm(fringe, shift))


def _stretches(fringe: CodedFringe, shift: int) -> tuple[FloatArray, FloatArray]:
    """Return first and last code of each piece; the last piece reaches back to its full length."""
    starts = np.arange(fringe.first, fringe.last + 1, 1 << shift)
    lows = np.maximum(np.minimum(starts, fringe.last + 1 - (1 << shift)), fringe.first)
    highs = np.minimum(lows + (1 << shift) - 1, fringe.last)
    return lows.astype(np.float64), highs.astype(np.float64)


def _remainder_fm(fringe: CodedFringe, shift: int) -> float:
    lows, highs = _stretches(fringe, shift)
    half = (highs - lows) / 2 / fringe.swing
    u = np.maximum(np.abs(lows - fringe.middle), np.abs(highs - fringe.middle)) / fringe.swing
    fourth = (9 * u + 6 * u**3) / (1 - u**2) ** 3.5
    return float(np.max(half**4 * fourth)) / (24 * 8) * fringe.metres_per_radian * FM


def _coefficients(fringe: CodedFringe, shift: int) -> FloatArray:
    """Return the cubics' coefficients [fm], shape (pieces, 4), in powers of ρ/2^(shift−1)."""
    lows, highs = _stretches(fringe, shift)
    middle, half = (lows + highs) / 2, np.maximum((highs - lows) / 2, 0.5)
    values = fringe.exact_fm(middle[:, None] + half[:, None] * _NODES)
    angle = np.arccos(_NODES)
    c = np.stack([values @ np.cos(j * angle) / 2 for j in range(4)], axis=1)
    # Chebyshev's polynomials to powers of t, then t = a·τ + b with τ = ρ/2^(shift−1).
    p = np.stack([c[:, 0] / 2 - c[:, 2], c[:, 1] - 3 * c[:, 3], 2 * c[:, 2], 4 * c[:, 3]], axis=1)
    centres = np.arange(fringe.first, fringe.last + 1, 1 << shift) + (1 << (shift - 1))
    a, b = (1 << (shift - 1)) / half, (centres - middle) / half
    return np.stack(
        [
            p[:, 0] + b * (p[:, 1] + b * (p[:, 2] + b * p[:, 3])),
            a * (p[:, 1] + b * (2 * p[:, 2] + 3 * b * p[:, 3])),
            a**2 * (p[:, 2] + 3 * b * p[:, 3]),
            a**3 * p[:, 3],
        ],
        axis=1,
    )
