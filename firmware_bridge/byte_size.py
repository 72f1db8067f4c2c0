"""Sizes of files as people write them."""

import math
import re

from firmware_bridge.errors import BridgeError

__all__ = ["byte_size_text", "parse_byte_size"]

_SIZE = re.compile(r"\s*(\d+(?:\.\d*)?|\.\d+)\s*([kMGT]?)(i?)B\s*")
_DIGITS = 3
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


def byte_size_text(number: float, *, is_up: bool = False) -> str:
    """Return a number of bytes as people write it.

    Parameters
    ----------
    number : float
        Bytes, > 0.
    is_up : bool
        Round up, where less would be too little.

    Returns
    -------
    str
        Three digits in powers of 1000, such as ``"115 MB"``; whole bytes below a thousand.
    """
    step = 10.0 ** max(0, math.floor(math.log10(number)) + 1 - _DIGITS)
    rounded = max(1.0, (math.ceil if is_up else round)(number / step) * step)
    power = min(math.floor(math.log10(rounded)) // 3, 4)
    return f"{rounded / 1000**power:.4g} {'kMGT'[power - 1] if power else ''}B"
