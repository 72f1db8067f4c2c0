"""The folder a rehearsal leaves: bench file, recordings, calibration, displacement, page, truth."""

import re
from collections.abc import Sequence
from importlib.resources import files
from pathlib import Path
from typing import Any

from calibration.errors import CalibrationError
from calibration.rehearsal import Rehearsal
from calibration.session_plot import Shown, save_session_page
from firmware_bridge.export import export_recording
from metro.bench import Bench, BenchLine, load_bench
from metro.bench_keys import OPTIONS
from metro.measured import Measured
from metro.output import to_json, write_whole

__all__ = [
    "FolderError",
    "comparison_document",
    "leave",
    "prepare",
    "rehearsal_bench",
    "with_lines",
]

_BUILT_IN = files("firmware_bridge.simulated").joinpath("bench.toml")


class FolderError(CalibrationError):
    """A folder that cannot take a session's files."""


def rehearsal_bench(given: Bench) -> tuple[Bench, str]:
    """Return the bench to play and the text of its file.

    Parameters
    ----------
    given : Bench
        From the command line: a file's, or only overrides, or nothing.

    Returns
    -------
    tuple of (Bench, str)
        The bench, without a file the built-in one; overrides stand in the text as well.
    """
    source = Path(given.path) if given.path else Path(str(_BUILT_IN))
    kept = load_bench(source)
    text = source.read_text(encoding="utf-8")
    for key in OPTIONS.values():
        value = given.get(key)
        if value is not None and value != kept.get(key):
            text = _with_value(text, key, value)
            kept = kept.replace({key: value})
    return kept, text


def _with_value(text: str, key: str, value: Measured) -> str:
    """Return the text of a bench file with one value replaced, or added to its section."""
    section, _, name = key.partition(".")
    unit = "" if value.unit == "1" else f" {value.unit}"
    line = f'{name} = "{value.magnitude!r}{unit}"  # from the command line'
    head = f"[{section}]\n"
    if head not in text:
        return f"{text.rstrip()}\n\n{head}{line}\n"
    before, _, rest = text.partition(head)
    end = re.search(r"^\[|\Z", rest, re.MULTILINE)
    place = len(rest) if end is None else end.start()
    body, after = rest[:place], rest[place:]
    body, found = re.subn(rf"^{name} *=.*$", line, body, count=1, flags=re.MULTILINE)
    return before + head + ("" if found else f"{line}\n") + body + after


def with_lines(text: str, lines: Sequence[BenchLine]) -> str:
    """Return the text of a bench file with other lines, as a plan sets them.

    Parameters
    ----------
    text : str
        TOML; its ``[[line]]`` tables go, all else stays.
    lines : sequence of BenchLine
        Frequencies and drives.

    Returns
    -------
    str
        With one ``[[line]]`` each at the place of the first old one, or at the end.
    """
    new = "\n".join(
        f'[[line]]\nfrequency = "{line.frequency_hz!r} Hz"\n'
        + ("" if line.drive_v is None else f'drive = "{line.drive_v!r} V"  # from the plan\n')
        for line in lines
    )
    # a table ends where the next begins, or where comments that introduce the next do
    table = re.compile(r"^\[\[line\]\][^\n]*\n(?:(?!\[|#)[^\n]*\n?)*", re.MULTILINE)
    first = table.search(text)
    if first is None:
        return f"{text.rstrip()}\n\n{new}"
    rest = table.sub("", text[first.end() :])
    return f"{text[: first.start()]}{new}\n{rest}"


def prepare(folder: Path, *, overwrite: bool) -> None:
    """Make the folder; refuse one that holds something unless ``overwrite``.

    Parameters
    ----------
    folder : Path
        Where the session's files go.
    overwrite : bool
        Whether files in it may be replaced.

    Raises
    ------
    FolderError
        If it is no folder, holds something, or cannot be made.
    """
    if folder.exists() and not folder.is_dir():
        raise FolderError(f"--out must be a folder, got the file {folder}")
    if folder.is_dir() and any(folder.iterdir()) and not overwrite:
        raise FolderError(f"the folder {folder} is not empty; --overwrite replaces its files")
    try:
        folder.mkdir(parents=True, exist_ok=True)
    except OSError as error:
        raise FolderError(f"cannot make the folder {folder}: {error.strerror}") from None


def comparison_document(rehearsal: Rehearsal) -> dict[str, Any]:
    """Return truth and measured values by name, in JSON form."""
    found = rehearsal.comparisons
    return {
        "seed": rehearsal.seed,
        "truth": {c.name: c.truth_dict() for c in found},
        "measured": {c.name: c.measured.to_dict(with_dof=True) for c in found},
        "inside_95": {c.name: c.inside_95 for c in found},
    }


def leave(rehearsal: Rehearsal, folder: Path, bench_text: str) -> list[str]:
    """Write all that the session gave into its folder and return the files' paths.

    Parameters
    ----------
    rehearsal : Rehearsal
        The session; its recordings are in the folder already.
    folder : Path
        From `prepare`.
    bench_text : str
        The bench file to leave.

    Returns
    -------
    list of str
        Every file, recordings included.
    """
    written = {
        "bench.toml": bench_text,
        "calibration.json": to_json(rehearsal.calibration.to_dict()) + "\n",
        "comparison.json": to_json(comparison_document(rehearsal)) + "\n",
    }
    for name, text in written.items():
        write_whole(folder / name, text, overwrite=True)
    export_recording(rehearsal.conversion, folder / "displacement.npz", overwrite=True)
    save_session_page(
        rehearsal.calibration,
        Shown.of_files(rehearsal.calibration, rehearsal.roles),
        rehearsal.comparisons,
        f"Rehearsal on a simulated bench, seed {rehearsal.seed}",
        folder / "session.png",
        overwrite=True,
    )
    names = [*written, "displacement.npz", "session.png"]
    return [str(path) for path in rehearsal.files.values()] + [str(folder / n) for n in names]
