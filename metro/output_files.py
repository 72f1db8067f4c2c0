"""The files that one run of a command writes: each a file of its own, and told of when one fails."""

import os
import stat
from collections.abc import Iterator, Mapping
from contextlib import contextmanager
from pathlib import Path

from metro.errors import MidfringeError
from metro.whole_file import OutputError

__all__ = ["check_distinct", "telling_what_is_kept"]


def check_distinct(files: Mapping[str, str | None]) -> None:
    """Refuse two outputs of one run in one file, under whatever names, before any work.

    Parameters
    ----------
    files : mapping of str to str or None
        Options such as ``"--out"`` and their files; None where the option was not given.

    Raises
    ------
    OutputError
        If two of them are the same file, also by a link or a detour such as ``./``.
    """
    taken: dict[Path, str] = {}
    for option, name in files.items():
        if not name:
            continue
        place = Path(os.path.realpath(name))
        if place in taken and (not place.exists() or place.is_file()):
            raise OutputError(
                f"{taken[place]} and {option} must name different files, got {name!r} for both"
            )
        taken[place] = option


@contextmanager
def telling_what_is_kept(files: Mapping[str, str | None]) -> Iterator[None]:
    """Add to the message of an output that failed which of the run's other files are whole.

    Parameters
    ----------
    files : mapping of str to str or None
        As for :func:`check_distinct`.

    Raises
    ------
    MidfringeError
        As it was raised, with the files that were written before it.
    """
    names = [name for name in files.values() if name]
    before = {name: _state(name) for name in names}
    try:
        yield
    except MidfringeError as error:
        kept = [name for name in names if _state(name) != before[name]]
        if kept:
            are = "is" if len(kept) == 1 else "are"
            error.args = (f"{error}; {', '.join(kept)} {are} whole and kept",)
        raise


def _state(name: str) -> tuple[int, int] | None:
    """Return what changes when a file is written; None where there is no file."""
    try:
        found = Path(name).stat()
    except (OSError, ValueError):
        return None
    return (found.st_ino, found.st_mtime_ns) if stat.S_ISREG(found.st_mode) else None
