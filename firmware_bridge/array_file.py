"""NPY, NPZ and HDF5 files to a table, without pickle."""

import zlib
from io import BytesIO
from pathlib import Path
from tokenize import TokenError
from typing import Any
from zipfile import BadZipFile

import numpy as np

from firmware_bridge.array_table import ArrayFileError, arrays_to_table
from firmware_bridge.table import Table
from metro.extras import require

__all__ = ["read_hdf5", "read_npy", "read_npz"]

# What the readers raise on damaged files; numpy reads a header as Python source.
_DAMAGE = (
    *(OSError, ValueError, EOFError, KeyError, NotImplementedError, MemoryError, OverflowError),
    *(BadZipFile, zlib.error, SyntaxError, TokenError),
)


def read_npy(source: Path | BytesIO, name: str) -> Table:
    """Read an NPY file: shape (n,), (n, channels), (channels, n), or records with fields.

    Parameters
    ----------
    source : Path or BytesIO
        The file.
    name : str
        Its name, for messages.

    Returns
    -------
    Table
        Its columns, named only where it holds records with fields.

    Raises
    ------
    ArrayFileError
        If it is damaged, pickled, or holds no real numbers.
    """
    try:
        array = np.load(source, allow_pickle=False)
    except _DAMAGE as error:
        raise ArrayFileError(f"{name} cannot be read as NPY: {_reason(error)}") from None
    return arrays_to_table("npy", {"": array}, name)


def read_npz(source: Path | BytesIO, name: str) -> Table:
    """Read an NPZ file: its arrays of one length are the columns.

    Parameters
    ----------
    source : Path or BytesIO
        The file.
    name : str
        Its name, for messages.

    Returns
    -------
    Table
        Its columns by name; a single number called rate, fs or dt gives the rate.

    Raises
    ------
    ArrayFileError
        If it is damaged, pickled, or holds no real numbers.
    """
    try:
        with np.load(source, allow_pickle=False) as archive:
            arrays = {key: archive[key] for key in archive.files}
    except _DAMAGE as error:
        raise ArrayFileError(f"{name} cannot be read as NPZ: {_reason(error)}") from None
    return arrays_to_table("npz", arrays, name)


def read_hdf5(source: Path | BytesIO, name: str) -> Table:
    """Read an HDF5 file: its datasets of one length are the columns.

    Parameters
    ----------
    source : Path or BytesIO
        The file.
    name : str
        Its name, for messages.

    Returns
    -------
    Table
        Its columns by name, with the units of their attributes; an attribute called rate, fs or
        dt gives the rate.

    Raises
    ------
    ArrayFileError
        If it is damaged or holds no real numbers.
    MissingExtraError
        If h5py is not installed.
    """
    h5py = require("h5py", "bench", "reading HDF5")
    try:
        with h5py.File(source, "r") as file:
            found = _datasets(file, h5py)
            attributes = _attributes(file, found)
            arrays = {key: np.asarray(item) for key, item in found.items() if item.size}
            units = {key: _unit(item) for key, item in found.items()}
    except (*_DAMAGE, RuntimeError, TypeError) as error:
        raise ArrayFileError(f"{name} cannot be read as HDF5: {_reason(error)}") from None
    return arrays_to_table("hdf5", arrays, name, units=units, attributes=attributes)


def _datasets(file: Any, h5py: Any) -> dict[str, Any]:  # noqa: ANN401  # an untyped library
    """Return the datasets with numbers, by their last name where that is unique."""
    found: dict[str, Any] = {}

    def add(path: str, item: Any) -> None:  # noqa: ANN401  # same
        if isinstance(item, h5py.Dataset) and (item.dtype.kind in "iufb" or item.dtype.names):
            found[path] = item

    order = [str(text) for text in np.ravel(file.attrs.get("columns", []))]
    for key in order:
        if key in file:
            add(key, file[key])
    file.visititems(add)
    short = [path.rpartition("/")[2] for path in found]
    return {
        (last if short.count(last) == 1 else path): item
        for last, (path, item) in zip(short, found.items(), strict=True)
    }


def _attributes(file: Any, found: dict[str, Any]) -> dict[str, Any]:  # noqa: ANN401  # same
    attributes: dict[str, Any] = {}
    for item in [*found.values(), file]:
        attributes |= dict(item.parent.attrs) | dict(item.attrs)
    return {key: _plain(value) for key, value in attributes.items()}


def _unit(item: Any) -> str:  # noqa: ANN401  # same
    for key in ("unit", "units"):
        if key in item.attrs:
            return str(_plain(item.attrs[key]))
    return ""


def _plain(value: Any) -> Any:  # noqa: ANN401  # same
    if isinstance(value, bytes):
        return value.decode(errors="replace")
    if isinstance(value, np.ndarray) and value.size == 1:
        return _plain(value.ravel()[0])
    return value


def _reason(error: BaseException) -> str:
    text = " ".join(str(error).split()) or type(error).__name__
    return "it holds Python objects" if "pickle" in text else text[:120]
