"""The runs of True in a mask: stretches of samples that are missing or marked."""

import numpy as np
from numpy.typing import NDArray

__all__ = ["mask_runs"]


def mask_runs(mask: NDArray[np.bool_]) -> list[tuple[int, int]]:
    """Return where each run of True begins and ends.

    Parameters
    ----------
    mask : ndarray of bool, shape (n,)
        A mark for each sample.

    Returns
    -------
    list of (int, int)
        First position of each run and the one behind its last, in order.
    """
    edges = np.flatnonzero(np.diff(mask.astype(np.int8), prepend=0, append=0)).tolist()
    return list(zip(edges[::2], edges[1::2], strict=True))
