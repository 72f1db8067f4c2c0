"""``midfringe emit``: the converter for the board, in C or MicroPython."""

from __future__ import annotations

from pathlib import PurePath
from typing import TYPE_CHECKING

import click

from calibration.caution_lines import caution_lines
from metro.options import (
    bench_options,
    command,
    distrust,
    is_quiet,
    is_verbose,
    output_options,
)

if TYPE_CHECKING:
    from calibration.emit.cubic_pieces import CubicPieces
    from calibration.record import Calibration
    from metro.bench import Bench

__all__ = ["emit"]

_SUFFIXES = {"c": (".h", ".hpp", ".c", ".inc"), "micropython": (".py",)}


@command(
    example="midfringe emit c --low 0.44V --high 2.87V --wavelength 632.9908nm "
    "--adc-bits 12 --adc-range 3.3V --codes unsigned --out converter.h"
)
@click.argument("language", type=click.Choice(list(_SUFFIXES)), metavar="LANGUAGE")
@click.option("--calibration", "calibration_file", metavar="FILE", help="From calibrate.")
@click.option(
    "--slope",
    type=click.Choice(["rising", "falling"]),
    default="rising",
    show_default=True,
    help="The side of the fringe the board works on.",
)
@click.option(
    "--codes",
    type=click.Choice(["signed", "unsigned"]),
    default="signed",
    show_default=True,
    help="Whether codes lie on both sides of 0, which reads adc.offset, or begin there.",
)
@bench_options
@output_options("out", "json", "overwrite")
def emit(
    language: str,
    calibration_file: str | None,
    slope: str,
    codes: str,
    bench: Bench,
    out: str | None,
    as_json: bool,
    overwrite: bool,
) -> None:
    """Write a converter for the board in LANGUAGE, c or micropython: codes to displacement near mid-fringe, in integers.

    From a calibration, or from --low, --high and --wavelength. The file proves its worst-case
    error; it is for looking and logging, not for closed loops.
    """
    from calibration.emit.board_file import board_file
    from calibration.emit.known_fringe import fringe_of_bench, fringe_of_calibration
    from calibration.emit.piece_fit import fit_pieces
    from calibration.record import load
    from metro.output import check_writable, to_json, write_whole

    if out is None:
        raise click.UsageError("--out must name the file to write, such as converter.h, got none")
    suffix = PurePath(out).suffix.lower()
    if suffix not in _SUFFIXES[language] and not out.startswith("/dev/"):
        known = " or ".join(_SUFFIXES[language])
        raise click.UsageError(f"--out must end in {known} for {language}, got {out!r}")
    check_writable(out, overwrite, [calibration_file, bench.path])
    calibration = None if calibration_file is None else load(calibration_file)
    if calibration is None:
        fringe = fringe_of_bench(bench, slope, is_signed=codes == "signed")
    else:
        fringe = fringe_of_calibration(calibration, bench, slope, is_signed=codes == "signed")
    pieces = fit_pieces(fringe)
    write_whole(out, board_file(pieces, language), overwrite=overwrite)
    document = _document(pieces, out)
    click.echo(to_json(document) if as_json else _page(pieces, out))
    _warn(calibration)


def _document(pieces: CubicPieces, out: str) -> dict[str, object]:
    ends = [end * 1e-15 for end in pieces.range_fm]
    return {
        "file": out,
        "worst_error": {"value": pieces.bound_fm * 1e-15, "unit": "m", "u": None},
        "range": {"value": ends, "unit": "m", "u": None},
    }


def _page(pieces: CubicPieces, out: str) -> str:
    from metro.display import show
    from metro.output import table

    low, high = (end * 1e-15 for end in pieces.range_fm)
    fringe = pieces.fringe
    return table(
        [
            ["file", out],
            ["worst error, proved", show(pieces.bound_fm * 1e-15, "m", 3)],
            ["one count at mid-fringe", show(fringe.metres_per_radian / fringe.swing, "m", 3)],
            ["range", f"{show(low, 'm', 4)} to {show(high, 'm', 4)}"],
            ["codes", f"{fringe.first} to {fringe.last}"],
            ["tables", f"{16 * len(pieces.table)} bytes"],
            ["not for", "closed loops"],
        ]
    )


def _warn(calibration: Calibration | None) -> None:
    if calibration is None:
        return
    if not is_quiet():
        kept = calibration.cautions
        for caution in caution_lines(kept, kept, is_verbose=is_verbose()):
            click.echo(f"caution: {caution}", err=True)
    if calibration.all_reasons:
        distrust(calibration.all_reasons)
