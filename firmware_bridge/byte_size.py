"""Sizes of files as people write them."""

import re

from firmware_bridge.errors import BridgeError

__all__ = ["parse_byte_size"]

_SIZE = re.compile(r"\s*(\d+(?:\.\d*)?|\.\d+)\s*([kMGT]?)(i?)B\s*")
_POWERS = {"": 0, "k": 1, "M": 2, "G": 3, "T": 4}


def parse_byte_size(text: str, name: str) -> int:
    """Return a number of bytes.

    Parameters
    ----------
    text : str
        Such as ``"500 MB"`` (powers of 1000) or ``"2 GiB"`` (of 1024).
    name : str
        What it is, for the message.

    Returns
    -------
    int
        Bytes, > 0.

    Raises
    ------
    BridgeError
        If it is no size.

    References
    ----------
    IEC 80000-13:2008, 4 (binary prefixes).
    """
    match = _SIZE.fullmatch(text.replace("Ki", "ki"))
    size = 0.0
    if match:
        size = float(match[1]) * (1024 if match[3] else 1000) ** _POWERS[match[2]]
    if not 1 <= size < 2**63:
        raise BridgeError(f"{name} must be a size such as '500 MB' or '2 GiB', got {text!r}")
    return round(size)
