"""Coarse blocks: phasors of short blocks added up to those of longer ones.

The carriers of a short block fit a core's cache; a recording of thousands of millions of samples has too
many of them to keep.
"""

from dataclasses import replace
from typing import Any

import numpy as np
from numpy.typing import NDArray

from calibration.phasors import BlockPhasors

__all__ = ["coarsened"]


def coarsened(phasors: BlockPhasors, block: int) -> BlockPhasors:
    """Return the phasors in longer blocks.

    Parameters
    ----------
    phasors : BlockPhasors
        Of a recording or a part of it; its block a multiple of 8, or ``block`` itself.
    block : int
        A multiple of its block.

    Returns
    -------
    BlockPhasors
        As if the samples had been summed in these blocks, to rounding.
    """
    small = phasors.block
    if small == block:
        return phasors
    many = block // small
    numbers, place = np.unique(phasors.numbers // many, return_inverse=True)
    # u counts from the middle of the long block, in units of its length.
    shift = (phasors.middles - (numbers[place] * block + 0.5 * (block - 1))) / block
    sums, drift = phasors.sums, phasors.drift.copy()
    drift[:, 1] = drift[:, 1] / many + shift * drift[:, 0]
    slopes = phasors.slopes
    if slopes is not None:
        slopes = slopes / many + shift[:, None] * sums
    counts = _added(phasors.counts, place, len(numbers))
    touched, masks = _masks(phasors, numbers[counts < block], many)
    return replace(
        phasors,
        block=block,
        numbers=numbers,
        counts=counts,
        present=_added(phasors.present, place, len(numbers)),
        sums=_added(sums, place, len(numbers)),
        slopes=None if slopes is None else _added(slopes, place, len(numbers)),
        drift=_added(drift, place, len(numbers)),
        touched=touched,
        masks=masks,
    )


def _added(values: NDArray[Any], place: NDArray[np.int64], n: int) -> NDArray[Any]:
    total = np.zeros((n, *values.shape[1:]), dtype=values.dtype)
    np.add.at(total, place, values)
    return total


def _masks(
    phasors: BlockPhasors, wanted: NDArray[np.int64], many: int
) -> tuple[NDArray[np.int64], NDArray[np.uint8]]:
    """Return the masks of the long blocks that are not full, made of those of the short ones."""
    width = phasors.block // 8
    masks = np.zeros((len(wanted), many, width), dtype=np.uint8)
    full = np.setdiff1d(phasors.numbers, phasors.touched)
    held = np.isin(full // many, wanted)
    masks[np.searchsorted(wanted, full[held] // many), full[held] % many] = 255
    held = np.isin(phasors.touched // many, wanted)
    thin = phasors.touched[held]
    masks[np.searchsorted(wanted, thin // many), thin % many] = phasors.masks[held]
    return wanted, masks.reshape(len(wanted), many * width)
