"""A matplotlib figure into a file, whole or not at all."""

from collections.abc import Iterable
from importlib.util import find_spec
from io import BytesIO
from pathlib import Path
from typing import TYPE_CHECKING

from metro.errors import MetroError
from metro.extras import require
from metro.whole_file import check_writable, write_whole

if TYPE_CHECKING:
    from matplotlib.figure import Figure

__all__ = ["FigureError", "check_figure", "save_figure"]

_FORMATS = ("png", "pdf", "svg")
_DPI = 110  # an A4 page becomes 910 × 1286 pixels: sharp on a screen, small on a disk


class FigureError(MetroError):
    """A picture's file type that is not drawn."""


def save_figure(figure: "Figure", path: str | Path, *, overwrite: bool = False) -> None:
    """Write a figure as PNG, PDF or SVG, by the file's suffix.

    Parameters
    ----------
    figure : Figure
        From matplotlib.
    path : str or Path
        The file to be.
    overwrite : bool
        Whether an existing file may be replaced.

    Raises
    ------
    FigureError
        If the suffix is none of these.
    OutputError
        If the file exists or cannot be written.
    """
    check_figure(path, overwrite)
    picture = BytesIO()
    figure.savefig(picture, format=_suffix(path), dpi=_DPI)
    write_whole(path, picture.getvalue(), overwrite=overwrite)


def check_figure(
    path: str | Path,
    overwrite: bool = False,  # as the option
    inputs: Iterable[str | Path | None] = (),
) -> None:
    """Refuse a picture that could not be written, before it is drawn.

    Parameters
    ----------
    path : str or Path
        The file to be.
    overwrite : bool
        Whether an existing file may be replaced.
    inputs : iterable of path or None
        Files that are read for it: none of them is ever replaced.

    Raises
    ------
    FigureError
        If the suffix is none of PNG, PDF and SVG.
    MissingExtraError
        If there is nothing to draw with.
    OutputError
        If the file exists, is an input or cannot be written.
    """
    if _suffix(path) not in _FORMATS:
        raise FigureError(f"--plot must end in .png, .pdf or .svg, got {str(path)!r}")
    check_writable(path, overwrite, inputs)
    if find_spec("matplotlib") is None:  # looked for, not loaded: what is refused costs no second
        require("matplotlib.figure", "bench", "--plot")


def _suffix(path: str | Path) -> str:
    return Path(path).suffix.lower().removeprefix(".")
