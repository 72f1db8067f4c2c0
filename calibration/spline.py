"""The spline: a slow course in time, constant or cubic in equal pieces."""

import numpy as np
from numpy.typing import NDArray

__all__ = ["fit_spline", "spline_size", "spline_span", "spline_weights"]


def spline_size(pieces: int) -> int:
    """Return the number of coefficients of a spline.

    Parameters
    ----------
    pieces : int
        Pieces of the spline; 0 for a constant.

    Returns
    -------
    int
        1 for a constant, else pieces + 3.
    """
    return pieces + 3 if pieces else 1


def spline_span(first: float, last: float, pieces: int) -> tuple[int, int]:
    """Return the columns that are not zero between two positions.

    Parameters
    ----------
    first, last : float
        Positions, 0 at the course's beginning and 1 at its end.
    pieces : int
        Pieces of the spline; 0 for a constant.

    Returns
    -------
    tuple of int
        First column and one past the last.
    """
    if pieces == 0:
        return 0, 1
    low = min(max(int(first * pieces), 0), pieces - 1)
    high = min(max(int(last * pieces), 0), pieces - 1)
    return low, high + 4


def spline_weights(
    position: NDArray[np.float64], pieces: int, span: tuple[int, int]
) -> NDArray[np.float64]:
    """Return the weights of the coefficients at given positions.

    Parameters
    ----------
    position : ndarray, shape (n,)
        Positions, 0 at the course's beginning and 1 at its end.
    pieces : int
        Pieces of the spline; 0 for a constant.
    span : tuple of int
        Columns wanted, as :func:`spline_span` gives them.

    Returns
    -------
    ndarray, shape (n, span[1] - span[0])
        Uniform cubic B-spline weights, which sum to one.
    """
    if pieces == 0:
        return np.ones((len(position), 1))
    piece = np.clip((position * pieces).astype(np.int64), 0, pieces - 1)
    u = position * pieces - piece
    v = 1.0 - u
    parts = (v**3, 3 * u**3 - 6 * u**2 + 4, 3 * v**3 - 6 * v**2 + 4, u**3)
    weights = np.zeros((len(position), span[1] - span[0]))
    rows = np.arange(len(position))
    for k, part in enumerate(parts):
        weights[rows, piece - span[0] + k] = part / 6.0
    return weights


def fit_spline(
    position: NDArray[np.float64], values: NDArray[np.float64], pieces: int
) -> NDArray[np.float64]:
    """Return the coefficients of the spline nearest to given values.

    Parameters
    ----------
    position : ndarray, shape (n,)
        Positions, 0 at the course's beginning and 1 at its end.
    values : ndarray, shape (n,)
        The course there.
    pieces : int
        Pieces of the spline; 0 for a constant.

    Returns
    -------
    ndarray, shape (spline_size(pieces),)
        Coefficients; what no value touches is carried on straight (third differences kept small).
    """
    size = spline_size(pieces)
    weights = spline_weights(position, pieces, (0, size))
    if pieces:
        keep_straight = 1e-3 * np.diff(np.eye(size), 2, axis=0)
        weights = np.vstack([weights, keep_straight])
        values = np.concatenate([values, np.zeros(len(keep_straight))])
    return np.asarray(np.linalg.lstsq(weights, values, rcond=None)[0])
