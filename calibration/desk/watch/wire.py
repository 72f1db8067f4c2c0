"""What travels from the server to a page: a small document and arrays, in one binary message.

Layout, little-endian: u32 length of the document in bytes; the document, JSON in UTF-8, padded with
spaces to a multiple of four; then float32 arrays one after the other. The document's ``arrays`` names
each with its first element and its length.
"""

import json
import struct
from collections.abc import Mapping
from math import isfinite
from typing import Any

import numpy as np
from numpy.typing import NDArray

__all__ = ["pack", "unpack"]

_LENGTH = struct.Struct("<I")


def pack(document: Mapping[str, Any], arrays: Mapping[str, NDArray[Any]]) -> bytes:
    """Return one message.

    Parameters
    ----------
    document : mapping
        What JSON can hold; numbers that are not finite become null.
    arrays : mapping of str to ndarray, shape (n,)
        Sent as float32.

    Returns
    -------
    bytes
        The message.
    """
    places, start, parts = {}, 0, []
    for name, values in arrays.items():
        part = np.ascontiguousarray(values, dtype="<f4")
        places[name] = [start, part.size]
        parts.append(part.tobytes())
        start += part.size
    text = json.dumps(_finite({**document, "arrays": places}), allow_nan=False).encode()
    text += b" " * (-len(text) % 4)
    return b"".join([_LENGTH.pack(len(text)), text, *parts])


def unpack(message: bytes) -> tuple[dict[str, Any], dict[str, NDArray[np.float32]]]:
    """Return the document and the arrays of a message, as a page reads it.

    Parameters
    ----------
    message : bytes
        What `pack` made.

    Returns
    -------
    tuple of dict and dict
        Document and arrays.
    """
    (length,) = _LENGTH.unpack_from(message)
    document = json.loads(message[4 : 4 + length])
    values = np.frombuffer(message, dtype="<f4", offset=4 + length)
    places = document.pop("arrays")
    return document, {name: values[a : a + n] for name, (a, n) in places.items()}


def _finite(value: Any) -> Any:  # noqa: ANN401  # whatever JSON holds
    if isinstance(value, float):
        return value if isfinite(value) else None
    if isinstance(value, dict):
        return {key: _finite(item) for key, item in value.items()}
    if isinstance(value, list | tuple):
        return [_finite(item) for item in value]
    return value
