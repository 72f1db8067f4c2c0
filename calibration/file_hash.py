"""The hash by which a file is known again."""

import hashlib
from os import PathLike
from pathlib import Path

__all__ = ["sha256_of"]

_CHUNK = 1 << 20


def sha256_of(path: str | PathLike[str]) -> str:
    """Return the SHA-256 of a file, read in chunks.

    Parameters
    ----------
    path : path
        The file.

    Returns
    -------
    str
        64 hexadecimal digits.

    Raises
    ------
    OSError
        If it cannot be read.

    References
    ----------
    FIPS 180-4, Secure Hash Standard.
    """
    digest = hashlib.sha256()
    with Path(path).open("rb") as file:
        while chunk := file.read(_CHUNK):
            digest.update(chunk)
    return digest.hexdigest()
