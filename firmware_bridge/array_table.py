"""Arrays to a table: what NPY, NPZ and HDF5 files have in common."""

import json
from collections import Counter
from collections.abc import Mapping
from typing import Any

import numpy as np
from numpy.typing import NDArray

from firmware_bridge.column_name import split_headers
from firmware_bridge.errors import BridgeError
from firmware_bridge.table import Table

__all__ = ["ArrayFileError", "arrays_to_table", "metadata_of"]

_RATES = (
    "rate_hz",
    "sample_rate",
    "sampling_rate",
    "samplerate",
    "sampling_frequency",
    "rate",
    "fs",
)
_INTERVALS = ("dt", "sample_interval", "sampling_interval", "dt_s")
_MAJOR = 1  # of the files that export writes; see firmware_bridge.export


class ArrayFileError(BridgeError):
    """An array file that is damaged or holds no columns of real numbers."""


def arrays_to_table(
    format: str,  # noqa: A002  # as in Table
    arrays: Mapping[str, NDArray[Any]],
    name: str,
    *,
    units: Mapping[str, str] | None = None,
    attributes: Mapping[str, Any] | None = None,
) -> Table:
    """Return the arrays of one length as the columns of a table.

    Parameters
    ----------
    format : str
        "npy", "npz" or "hdf5".
    arrays : mapping of str to ndarray
        One-dimensional columns, two-dimensional blocks of them (the longer side is time), records
        with fields, and single numbers such as a rate.
    name : str
        The file, for messages.
    units : mapping of str to str, optional
        The words for the units, by array.
    attributes : mapping, optional
        What the file says beside its arrays; its rate is used.

    Returns
    -------
    Table
        The columns; what was left out stands in the remarks.

    Raises
    ------
    ArrayFileError
        If no array holds real numbers.
    """
    columns: dict[str, NDArray[Any]] = {}
    for key, array in arrays.items():
        columns |= _columns_of(key, array)
    lengths = Counter(column.size for column in columns.values())
    if not lengths or max(lengths) < 1:
        raise ArrayFileError(f"{name} holds no column of real numbers")
    rows = max(lengths, key=lambda length: (lengths[length] * (length > 1), length))
    chosen = {key: column for key, column in columns.items() if column.size == rows}
    left_out = [key for key in columns if key not in chosen]
    stated = {**(attributes or {}), **{k: a for k, a in arrays.items() if a.size == 1}}
    own = metadata_of(stated, name)
    remarks = [f"{', '.join(left_out)}: of another length, not read"] if left_out else []
    # Our own names hold no units; others may, such as "U (mV)".
    keys = list(chosen)
    names, stated_units = (keys, [""] * len(keys)) if own else split_headers(keys)
    words = {key: word for key, word in (units or own.get("units", {})).items() if word}
    return Table(
        format=format,
        columns=[_as_float(column) for column in chosen.values()],
        names=[name.strip() for name in names],
        units=[str(words.get(key, word)) for key, word in zip(keys, stated_units, strict=True)],
        resolutions=[0.0] * len(chosen),
        rate_hz=own.get("rate_hz") or _maybe_rate_hz(stated),
        rate_u_hz=own.get("rate_u_hz"),
        gaps=own.get("gaps"),
        over_range=own.get("over_range", 0),
        remarks=remarks,
    )


def _columns_of(key: str, array: NDArray[Any]) -> dict[str, NDArray[Any]]:
    """Return the columns that an array holds; none where it holds no real numbers in columns."""
    if array.dtype.names:
        return {
            field: array[field].ravel() for field in array.dtype.names if _is_real(array[field])
        }
    if not _is_real(array) or array.ndim not in (1, 2) or (array.ndim == 1 and array.size < 2):
        return {}
    if array.ndim == 1:
        return {key: array}
    block = array if array.shape[0] >= array.shape[1] else array.T
    if block.shape[1] == 1:
        return {key: block[:, 0]}
    prefix = f"{key}:" if key else ""
    # Without a name the columns stay nameless: their number finds them.
    return {f"{prefix}{k + 1}" if key else " " * k: block[:, k] for k in range(block.shape[1])}


def _is_real(array: NDArray[Any]) -> bool:
    return array.dtype.kind in "iufb"


def _as_float(column: NDArray[Any]) -> NDArray[np.float64]:
    """Return a column in float64; large integers, such as nanosecond stamps, keep their steps."""
    if column.dtype.kind in "iu" and column.size and int(abs(int(column.max()))) >= 1 << 53:
        column = column - column[0]
    return np.ascontiguousarray(column, dtype=np.float64)


def _maybe_rate_hz(stated: Mapping[str, Any]) -> float | None:
    lowered = {key.lower(): value for key, value in stated.items()}
    for names, power in ((_RATES, 1), (_INTERVALS, -1)):
        for key in names:
            value = _maybe_scalar(lowered.get(key))
            if value is not None and 0 < value < float("inf"):
                return float(value**power)
    return None


def _maybe_scalar(value: Any) -> float | None:  # noqa: ANN401  # any attribute
    try:
        return float(np.asarray(value).ravel()[0]) if np.size(value) == 1 else None
    except (TypeError, ValueError):
        return None


def metadata_of(stated: Mapping[str, Any], name: str) -> dict[str, Any]:
    """Return what our own export wrote beside the arrays; empty for other files.

    Parameters
    ----------
    stated : mapping
        Attributes and single values of the file.
    name : str
        The file, for messages.

    Returns
    -------
    dict
        ``rate_hz``, ``rate_u_hz``, ``units``, ``gaps``, ``over_range``.

    Raises
    ------
    ArrayFileError
        If a newer major version wrote it.
    """
    text = stated.get("midfringe")
    if text is None:
        return {}
    try:
        document = json.loads(str(np.asarray(text).item()))
        version = int(str(document["version"]).partition(".")[0])
        gaps = [(int(i), int(n), float(u)) for i, n, u in document["gaps"]]
        known = {**document, "gaps": gaps, "rate_hz": float(document["rate_hz"])}
    except (KeyError, TypeError, ValueError):
        return {}
    if version > _MAJOR:
        raise ArrayFileError(
            f"{name} was written by a newer version (format {document['version']}); this one reads "
            f"up to {_MAJOR}"
        )
    return known
