"""The emitted file: a template of the board's language filled with pieces and their proof."""

from pathlib import Path
from string import Template

import firmware_bridge
from calibration.emit.coded_fringe import FM
from calibration.emit.cubic_pieces import CubicPieces
from calibration.working_point import EDGE

__all__ = ["LANGUAGES", "board_file"]

LANGUAGES = {"c": "converter.h.template", "micropython": "converter.py.template"}
"""The board's languages and their templates."""

_TEMPLATES = Path(firmware_bridge.__file__).parent / "firmware" / "converter"
_INT32_BITS = 32


def board_file(pieces: CubicPieces, language: str) -> str:
    """Return the converter as a file for the board.

    Parameters
    ----------
    pieces : CubicPieces
        What it computes.
    language : str
        ``"c"`` (a C99 header) or ``"micropython"`` (a module).

    Returns
    -------
    str
        The whole file, with the bound of its error.
    """
    text = (_TEMPLATES / LANGUAGES[language]).read_text(encoding="utf-8")
    fringe = pieces.fringe
    lines = [*fringe.origin, _converter(pieces)]
    is_c = language == "c"
    rows = [", ".join(map(str, row)) for row in pieces.table.tolist()]
    low_fm, high_fm = pieces.range_fm
    return Template(text).substitute(
        origin="\n".join(f" *   {line}" if is_c else f"  {line}" for line in lines),
        first=fringe.first,
        last=fringe.last,
        lowest=fringe.lowest,
        highest=fringe.highest,
        stale_below=fringe.stale_below,
        stale_above=fringe.stale_above,
        slope=fringe.slope,
        edge=f"{EDGE:g}",
        range_text=f"{low_fm * 1e-6:.4f} nm to {high_fm * 1e-6:+.4f} nm",
        pieces=len(pieces.table),
        codes=1 << pieces.shift,
        shift=pieces.shift,
        half=1 << (pieces.shift - 1),
        units=1 << pieces.guard,
        product="int32_t" if pieces.product_bits <= _INT32_BITS else "int64_t",
        product_bits=pieces.product_bits,
        flash=16 * len(pieces.table),
        interpolation=_up(pieces.interpolation_fm),
        rounding=_up(pieces.rounding_fm),
        bound=_up(pieces.bound_fm),
        worst=f"{pieces.worst_fm():.3f}",
        count=f"{fringe.metres_per_radian * FM / fringe.swing:.5g}",
        table="\n".join(f"    {{{row}}}," if is_c else f"    {row}," for row in rows),
    )


def _converter(pieces: CubicPieces) -> str:
    fringe = pieces.fringe
    kind = "signed" if fringe.is_signed else "unsigned"
    return (
        f"converter: {fringe.bits} bits, {kind} codes, {fringe.range_v:.7g} V, "
        f"{fringe.offset_v:.7g} V reads 0"
    )


def _up(value_fm: float) -> str:
    """Return a bound rounded up in its third decimal: a printed bound holds."""
    return f"{value_fm + 0.0005:.3f}"
