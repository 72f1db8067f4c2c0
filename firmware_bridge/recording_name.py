"""The plain file name of a recording, and where in its folder it goes."""

from pathlib import Path

from firmware_bridge.errors import BridgeError

__all__ = ["recording_in"]

_FORBIDDEN = set('/\\:*?"<>|')


def recording_in(folder: Path, name: str) -> Path:
    """Return where a recording of a plain name goes.

    Parameters
    ----------
    folder : Path
        Where recordings go.
    name : str
        Such as ``run.mfr``.

    Returns
    -------
    Path
        Inside the folder.

    Raises
    ------
    BridgeError
        If the name could lead anywhere else, is no recording's, or is taken.
    """
    is_plain = name == Path(name).name and not set(name) & _FORBIDDEN and name.isprintable()
    if not is_plain or name.startswith(".") or not name.lower().endswith(".mfr"):
        raise BridgeError(f"name must be a plain file name NAME.mfr, got {name!r}")
    path = folder / name
    if path.exists() or path.is_symlink():
        raise BridgeError(f"{name} exists already in {folder}")
    return path
