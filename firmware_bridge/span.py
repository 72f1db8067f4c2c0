"""A span: values of some channels over some samples of a recording."""

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from firmware_bridge.errors import BridgeError

__all__ = ["Block", "Span", "SpanError"]


class SpanError(BridgeError):
    """A stretch of time that lies outside the recording or is empty."""


@dataclass(frozen=True, eq=False, slots=True)
class Span:
    """Values of some channels over some samples, as a recording reads them.

    Parameters
    ----------
    values : ndarray, shape (n, channels)
        Float64 in channel units, NaN where missing or over-range.
    over_range : int
        How many of the NaN are over-range values; the others are missing.
    """

    values: NDArray[np.float64]
    over_range: int = 0


@dataclass(frozen=True, eq=False, slots=True)
class Block:
    """A stretch of a recording: ``values`` as in `Span`, from sample ``start_index`` on."""

    start_index: int
    values: NDArray[np.float64]
    over_range: int = 0
