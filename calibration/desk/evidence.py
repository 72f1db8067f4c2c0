"""The recordings behind a calibration: whether they are still there, and still the same."""

from __future__ import annotations

from dataclasses import dataclass
from pathlib import Path, PurePosixPath, PureWindowsPath
from typing import TYPE_CHECKING

from calibration.errors import CalibrationError
from calibration.file_hash import sha256_of

if TYPE_CHECKING:
    from calibration.record import Calibration

__all__ = ["Evidence", "find_evidence"]


@dataclass(frozen=True)
class Evidence:
    """One recording that a calibration names.

    Parameters
    ----------
    role, file, sha256 : str
        As the calibration has them.
    samples, missing, over_range : int
        As the calibration counted them.
    path : Path or None
        Where the file lies now; None where it was not found.
    state : str
        ``"unchanged"``, ``"changed since"`` or ``"not found"``.
    """

    role: str
    file: str
    sha256: str
    samples: int
    missing: int
    over_range: int
    path: Path | None
    state: str

    @property
    def is_unchanged(self) -> bool:
        """Whether the file was found with the hash that the calibration kept."""
        return self.state == "unchanged"


def find_evidence(
    calibration: Calibration, folder: str | Path, *, follow: bool = False
) -> list[Evidence]:
    """Return the recordings of a calibration as they are found now.

    Parameters
    ----------
    calibration : Calibration
        What names them.
    folder : str or Path
        Where to look, by the name that the calibration kept.
    follow : bool
        Whether to look where the calibration says, too: ``folder`` is then its own, from which the
        kept paths count. Paths from the root, and those to another name, are not followed.

    Returns
    -------
    list of Evidence
        In the calibration's order.

    Raises
    ------
    CalibrationError
        If the folder is none, or a file in it cannot be read.
    """
    folder = Path(folder)
    if not folder.is_dir():
        raise CalibrationError(f"recordings must lie in a folder, got {str(folder)!r}")
    return [_evidence(record, folder, follow=follow) for record in calibration.recordings]


def _evidence(record: dict[str, object], folder: Path, *, follow: bool) -> Evidence:
    # the name alone: a calibration from elsewhere must not make this program read any file it likes
    path = folder / Path(str(record["file"])).name
    kept = str(record.get("path") or "")
    if follow and not path.is_file() and _is_near(kept, path.name):
        path = folder / kept
    known = str(record["sha256"])
    counts = {name: int(str(record.get(name, 0))) for name in ("samples", "missing", "over_range")}
    return Evidence(
        role=str(record["role"]),
        file=str(record["file"]),
        sha256=known,
        path=path if path.is_file() else None,
        state=_state(path, known),
        **counts,
    )


def _is_near(kept: str, name: str) -> bool:
    """Return whether a kept path is relative, on any system, and leads to the kept name."""
    windows = PureWindowsPath(kept)
    rooted = PurePosixPath(kept).is_absolute() or windows.drive or windows.root
    return not rooted and "\\" not in kept and PurePosixPath(kept).name == name


def _state(path: Path, known: str) -> str:
    if not path.is_file():
        return "not found"
    try:
        return "unchanged" if sha256_of(path) == known else "changed since"
    except OSError as error:
        raise CalibrationError(f"{path}: {error.strerror or error}") from None
