"""One kernel formula over arrays, for tables and logs; never for the samples of a recording."""

from collections.abc import Callable
from typing import Any

__all__ = ["elementwise", "is_array"]


def is_array(*values: Any) -> bool:  # noqa: ANN401  # floats and arrays alike
    """Return whether any of the values is an array.

    Parameters
    ----------
    *values : float or ndarray
        Magnitudes.

    Returns
    -------
    bool
        True if one of them has elements of its own.
    """
    return any(not isinstance(value, (int, float, complex)) for value in values)


def elementwise(function: Callable[..., Any], *values: Any) -> Any:  # noqa: ANN401  # floats and arrays alike
    """Return a function of floats applied to each element of arrays that fit together.

    Parameters
    ----------
    function : callable
        Takes and returns plain numbers.
    *values : float or ndarray
        Its arguments; shapes follow numpy's broadcasting.

    Returns
    -------
    float, complex, tuple or ndarray
        What ``function`` returns if no argument is an array; where it returns a tuple, the array
        has one more axis at its end.
    """
    if not is_array(*values):
        return function(*values)
    import numpy as np

    arrays = np.broadcast_arrays(*values)
    results = [function(*map(float, row)) for row in zip(*(a.flat for a in arrays), strict=True)]
    made = np.asarray(results)
    return made.reshape(arrays[0].shape + made.shape[1:])
