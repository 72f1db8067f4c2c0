"""Files written whole or not at all, and never over another unasked."""

import os
import secrets
import shutil
from collections.abc import Iterable, Iterator
from contextlib import contextmanager
from pathlib import Path
from typing import BinaryIO, cast

from metro.errors import MetroError

__all__ = [
    "OutputError",
    "OutputFailedError",
    "check_document",
    "check_writable",
    "write_whole",
    "writing_whole",
]

_NO_DOCUMENTS = (".mfr", ".toml", ".csv", ".npz", ".npy", ".h5", ".hdf5")
"""Suffixes of recordings and bench files: a JSON document under one is a slip of the hand."""


class OutputError(MetroError):
    """A file that cannot be written; nothing was left in its place."""


class OutputFailedError(OutputError):
    """A file that failed while it was written, as on a full disk."""

    exit_code = 3


def check_writable(
    path: str | os.PathLike[str],
    overwrite: bool = False,  # as the option
    inputs: Iterable[str | os.PathLike[str] | None] = (),
) -> Path:
    """Refuse a file that could not be written, before long work is begun.

    Parameters
    ----------
    path : path
        The file to be.
    overwrite : bool
        Whether an existing file may be replaced.
    inputs : iterable of path or None
        Files that are read for it: none of them is ever replaced. What is None, empty or ``-``
        (standard input) is passed over.

    Returns
    -------
    Path
        The same path.

    Raises
    ------
    OutputError
        If it exists, is an input or a directory, or its directory is missing or closed to us.
    """
    path = Path(path)
    try:
        problem = _clash(path, inputs) or _problem(path, overwrite)
    except OSError as error:
        problem = f"cannot write {path}: {_reason(error)}"
    if problem:
        raise OutputError(problem)
    return path


def check_document(
    path: str | os.PathLike[str],
    overwrite: bool = False,  # as the option
    inputs: Iterable[str | os.PathLike[str] | None] = (),
) -> Path:
    """Refuse a file for a JSON document as :func:`check_writable` does, and by its suffix.

    Parameters
    ----------
    path : path
        The file to be.
    overwrite : bool
        Whether an existing file may be replaced.
    inputs : iterable of path or None
        Files that are read for it, as for :func:`check_writable`.

    Returns
    -------
    Path
        The same path.

    Raises
    ------
    OutputError
        If it could not be written, is an input, or is named as recordings and bench files are.
    """
    path = Path(path)
    if path.suffix.lower() in _NO_DOCUMENTS:
        raise OutputError(f"--out is written as JSON: it must not end in {path.suffix}, got {path}")
    return check_writable(path, overwrite, inputs)


def _clash(path: Path, inputs: Iterable[str | os.PathLike[str] | None]) -> str:
    """Return why a file may not be replaced that is read itself; empty where it is not."""
    if not path.is_file():
        return ""
    for name in inputs:
        if name and os.fspath(name) != "-" and Path(name).exists() and path.samefile(name):
            return f"cannot write {path}: it is read for this itself; give another name"
    return ""


def _problem(path: Path, overwrite: bool) -> str:
    """Return why a file cannot be written; empty where nothing speaks against it."""
    parent = path.parent
    if os.fspath(path) == "-":
        return "an output must be a file, got '-'; --json writes to standard output"
    if path.is_dir():
        return f"cannot write {path}: it is a directory"
    if _is_device(path):
        return ""
    if not parent.exists():
        return f"cannot write {path}: there is no directory {parent}"
    if not parent.is_dir():
        return f"cannot write {path}: {parent} is not a directory"
    if path.exists() and not overwrite:
        return f"{path} exists; give --overwrite to replace it"
    if not os.access(parent, os.W_OK | os.X_OK):
        return f"cannot write {path}: no permission to write in {parent}"
    if len(os.fsencode(path.name)) > 255:  # what Linux and macOS file systems take
        return f"cannot write {path}: file name too long"
    return ""


def write_whole(
    path: str | os.PathLike[str], data: bytes | str, *, overwrite: bool = False
) -> None:
    """Write a file whole or not at all.

    Parameters
    ----------
    path : path
        The file to be; a device such as ``/dev/null`` is written to directly.
    data : bytes or str
        Its content; text as UTF-8.
    overwrite : bool
        Whether an existing file may be replaced.

    Raises
    ------
    OutputError
        If it exists or cannot be written; what was there before is then still there.
    """
    content = data.encode() if isinstance(data, str) else data
    with writing_whole(path, overwrite=overwrite) as file:
        file.write(content)


@contextmanager
def writing_whole(path: str | os.PathLike[str], *, overwrite: bool = False) -> Iterator[BinaryIO]:
    """Open a file to be written piece by piece, there whole at the end or not at all.

    Parameters
    ----------
    path : path
        The file to be; a device such as ``/dev/null`` is written to directly.
    overwrite : bool
        Whether an existing file may be replaced.

    Yields
    ------
    file
        Binary; what is not a device can be read and sought in as well.

    Raises
    ------
    OutputError
        If it exists or cannot be written; what was there before is then still there.
    """
    path = check_writable(path, overwrite).resolve()  # a link stays, its target is replaced
    if _is_device(path):
        with _filling(path, path, "wb") as file:
            yield file
        return
    # In the same directory, so that the final rename stays within one file system.
    temporary = path.with_name(f".midfringe-{os.getpid()}-{secrets.token_hex(4)}.part")
    try:
        with _filling(temporary, path, "x+b") as file:
            yield file
        _put_in_place(temporary, path, overwrite)
    finally:
        temporary.unlink(missing_ok=True)


def _is_device(path: Path) -> bool:
    return path.exists() and not path.is_file()


@contextmanager
def _filling(target: Path, named: Path, mode: str) -> Iterator[BinaryIO]:
    try:
        file = cast("BinaryIO", target.open(mode))
    except OSError as error:
        raise OutputError(f"cannot write {named}: {_reason(error)}") from None
    try:
        with file:
            yield file
            file.flush()
            if mode != "wb":
                os.fsync(file.fileno())
    except OSError as error:
        raise OutputFailedError(
            f"writing {named} failed: {_reason(error)}; nothing was left there"
        ) from None


def _put_in_place(temporary: Path, path: Path, overwrite: bool) -> None:
    try:
        if overwrite:
            if path.exists():
                shutil.copymode(path, temporary)
            temporary.replace(path)
            return
        os.link(temporary, path)  # refuses a file that appeared meanwhile; a rename would not
    except FileExistsError:
        raise OutputError(f"{path} exists; give --overwrite to replace it") from None
    except OSError as error:
        if overwrite or path.exists():
            raise OutputError(f"cannot write {path}: {_reason(error)}") from None
        temporary.replace(path)  # a file system without hard links


def _reason(error: OSError) -> str:
    return (error.strerror or str(error)).lower()
