"""Counts to bytes and back: 16, 24 and 32 bits, little-endian, channels side by side."""

from typing import Any

import numpy as np
from numpy.typing import NDArray

from firmware_bridge.message_head import MessageError

__all__ = ["pack_samples", "unpack_samples"]


def pack_samples(samples: NDArray[Any], width: int) -> NDArray[np.uint8]:
    """Return samples as the wire packs them.

    Parameters
    ----------
    samples : ndarray of int, shape (n, channels)
        Counts within the format.
    width : int
        Bytes per sample: 2, 3 or 4.

    Returns
    -------
    ndarray of uint8, shape (n, channels · width)
        Little-endian two's complement, channels side by side.

    Raises
    ------
    MessageError
        If a count does not fit the format.
    """
    half = 1 << (8 * width - 1)
    fits = samples.dtype.kind == "i" and samples.dtype.itemsize <= width
    if samples.size and not fits:
        low, high = int(samples.min()), int(samples.max())
        if low < -half or high >= half:
            raise MessageError(
                f"int{8 * width} samples must be {-half} to {half - 1}, got {low} to {high}"
            )
    n, channels = samples.shape
    if width == 3:
        wide = samples.astype("<i4").view(np.uint8).reshape(n, channels, 4)
        return np.ascontiguousarray(wide[:, :, :3]).reshape(n, channels * 3)
    return samples.astype(f"<i{width}").view(np.uint8).reshape(n, channels * width)


def unpack_samples(
    payload: bytes | NDArray[np.uint8], channels: int, width: int
) -> NDArray[np.int16] | NDArray[np.int32]:
    """Return the counts that `pack_samples` packed.

    Parameters
    ----------
    payload : bytes or ndarray of uint8
        n · channels · width bytes.
    channels, width : int
        Channels, and bytes per sample.

    Returns
    -------
    ndarray, shape (n, channels)
        int16 for width 2, else int32.
    """
    data = np.frombuffer(payload, np.uint8)
    if width == 3:
        wide = np.zeros((data.size // 3, 4), np.uint8)
        wide[:, 1:] = data.reshape(-1, 3)
        # Shifted down from the top of 32 bits, the sign comes along.
        return (wide.reshape(-1).view("<i4") >> 8).astype(np.int32).reshape(-1, channels)
    if width == 2:
        return data.view("<i2").astype(np.int16, copy=False).reshape(-1, channels)
    return data.view("<i4").astype(np.int32, copy=False).reshape(-1, channels)
