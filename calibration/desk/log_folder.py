"""The recordings of unattended logging: named by the moment they begin, the oldest deleted in time."""

import contextlib
import os
import re
import time
from collections.abc import Iterator
from dataclasses import dataclass
from datetime import UTC, datetime
from pathlib import Path

from calibration.desk.ledger_errors import LedgerError
from metro.errors import MidfringeError

__all__ = ["LogFolder", "Retention"]

_WRONG_INPUT = 2  # the exit code at which a command leaves no file behind


@dataclass(frozen=True, slots=True)
class Retention:
    """What is kept of the recordings.

    Parameters
    ----------
    keep_bytes : int or None
        All of them together, the running one included [bytes]; None for no limit.
    keep_s : float or None
        Those that ended less than this ago [s]; None for no limit.
    """

    keep_bytes: int | None = None
    keep_s: float | None = None


class LogFolder:
    """The recordings ``NAME-YYYYmmddTHHMMSSZ.mfr`` of one log in one folder.

    Parameters
    ----------
    place : path
        ``FOLDER/NAME``; the folder must exist.
    retention : Retention
        What is kept. Only closed recordings of this very name are ever deleted.

    Raises
    ------
    LedgerError
        If the folder is missing or closed to us, or the name is none.
    """

    def __init__(self, place: str | os.PathLike[str], retention: Retention) -> None:
        path = Path(place)
        self.folder, self.name = path.parent, path.name
        self.retention = retention
        self._pattern = re.compile(rf"{re.escape(self.name)}-\d{{8}}T\d{{6}}Z(-\d+)?\.mfr")
        self._grown = 0
        self._seen_bytes = 0
        self.deleted = 0
        """Recordings deleted so far."""
        if not self.name or self.name.lower().endswith(".mfr"):
            raise LedgerError(
                f"--out must be FOLDER/NAME, to which times are added, got {os.fspath(place)!r}"
            )
        if not self.folder.is_dir():
            raise LedgerError(f"--out: there is no folder {self.folder}")
        if not os.access(self.folder, os.W_OK | os.X_OK):
            raise LedgerError(f"--out: no permission to write in {self.folder}")

    def next_path(self) -> Path:
        """Return the path of a recording that begins now; there is no such file yet."""
        moment = datetime.now(UTC).strftime("%Y%m%dT%H%M%SZ")
        path = self.folder / f"{self.name}-{moment}.mfr"
        number = 2
        while path.exists():
            path = self.folder / f"{self.name}-{moment}-{number}.mfr"
            number += 1
        return path

    def recordings(self) -> list[Path]:
        """Return the recordings of this log, the oldest first."""
        found = [path for path in self.folder.iterdir() if self._pattern.fullmatch(path.name)]
        return sorted(found, key=_begun)

    def tidy(self, running: Path | None, *, by_size: bool = True) -> list[Path]:
        """Delete closed recordings that are not to be kept, the oldest first.

        Parameters
        ----------
        running : Path or None
            The recording that is being written: never deleted.
        by_size : bool
            Whether to keep within ``keep_bytes``; else by age alone.

        Returns
        -------
        list of Path
            Those that were deleted.
        """
        sizes = {path: _size(path) for path in self.recordings()}
        total = sum(sizes.values())
        # Room for what comes until this is asked again: twice the most that came in between so far,
        # since records are written in pieces of half a second; a quarter of all at most.
        if self._seen_bytes:
            self._grown = max(self._grown, total - self._seen_bytes)
        margin = 0 if running is None else 2 * self._grown
        if self.retention.keep_bytes is not None:
            margin = min(margin, self.retention.keep_bytes // 4)
        closed = [path for path in sizes if path != running]
        deleted = []
        for path in closed:
            if not self._is_due(path, total + margin if by_size else 0):
                break
            with contextlib.suppress(FileNotFoundError):
                path.unlink()
            total -= sizes[path]
            deleted.append(path)
        self._seen_bytes = total
        self.deleted += len(deleted)
        return deleted

    def _is_due(self, path: Path, total: int) -> bool:
        keep = self.retention
        if keep.keep_bytes is not None and total > keep.keep_bytes:
            return True
        return keep.keep_s is not None and time.time() - _modified(path) > keep.keep_s

    @contextlib.contextmanager
    def held(self) -> Iterator[None]:
        """Hold the name against another log in the same place, however either of them ends.

        Yields
        ------
        None
            While it is held.

        Raises
        ------
        LedgerError
            If another one has it.
        """
        path = self.folder / f".{self.name}.lock"
        is_new = not path.exists()
        try:
            descriptor = os.open(path, os.O_CREAT | os.O_RDWR, 0o644)
        except OSError as error:
            raise LedgerError(f"{path}: {(error.strerror or str(error)).lower()}") from None
        try:
            _lock(descriptor, self, path)
            try:
                yield
            except MidfringeError as error:
                if is_new and error.exit_code == _WRONG_INPUT:
                    path.unlink(missing_ok=True)  # still held: who waits for it sees it gone
                raise
        finally:
            os.close(descriptor)  # with it the lock; the file stays, so that two cannot hold it


def _lock(descriptor: int, folder: LogFolder, path: Path) -> None:
    try:
        import fcntl
    except ImportError:  # no such locks on this system
        return
    try:
        fcntl.flock(descriptor, fcntl.LOCK_EX | fcntl.LOCK_NB)
        is_ours = path.exists() and os.path.samestat(path.stat(), os.fstat(descriptor))
    except OSError:
        is_ours = False
    if not is_ours:  # held by another, or just taken away by the log that made it
        raise LedgerError(f"--out: another log is writing {folder.folder / folder.name} already")


def _begun(path: Path) -> tuple[str, int]:
    """Return what sorts recordings by their beginning, several of one second included."""
    moment, _, number = path.stem.rpartition("Z")
    return moment, int(number[1:] or 1)


def _size(path: Path) -> int:
    with contextlib.suppress(OSError):
        return path.stat().st_size
    return 0


def _modified(path: Path) -> float:
    with contextlib.suppress(OSError):
        return path.stat().st_mtime
    return time.time()
