"""Names and units of columns, as the headers of recordings write them."""

import re
from collections.abc import Sequence

from firmware_bridge.unit_word import WORDS, is_unit_word, si_unit

__all__ = ["bare_name", "split_header", "split_headers", "time_unit_s"]

_TIME_UNITS_S = {"s": 1.0, "ms": 1e-3, "us": 1e-6, "ns": 1e-9, "min": 60.0, "h": 3600.0}
_TIME_NAME = re.compile(
    r"(?:rel(?:ative)?|abs(?:olute)?|elapsed|unix|board|host|sample)?[ _-]*"
    r"(?:t|times?|time[ _-]?stamps?|zeit|temps|tiempo|tempo|clock|seconds?|secs?|millis|micros"
    r"|milliseconds?|microseconds?|elapsed)(?:[ _-]+(?P<unit>s|secs?|ms|msec|us|µs|ns|min|h|seconds?"
    r"|millis|micros|milliseconds?|microseconds?))?",
    re.IGNORECASE,
)
_WITH_UNIT = re.compile(
    r"(?P<name>.*?)\s*(?:\[(?P<a>[^\]]*)\]|\((?P<b>[^()]*)\)|\s/\s*(?P<c>\S+)|/\s*(?P<d>[^\s/]+)"
    r"|\s+in\s+(?P<e>\S+))\s*"
)


def split_header(header: str) -> tuple[str, str]:
    """Return name and unit of a header such as ``photodiode [V]`` or ``Time (ms)``.

    Parameters
    ----------
    header : str
        One field of a header line.

    Returns
    -------
    tuple of (str, str)
        The name, and the word for the unit (empty where there is none).
    """
    match = _WITH_UNIT.fullmatch(header)
    # "V/rad" is a unit; "T / ms" is a name and a unit, though it could be read as one.
    is_unit = " / " not in header and is_unit_word(header)
    if match and match["name"] and not is_unit:
        word = next((part for part in match.group("a", "b", "c", "d", "e") if part is not None), "")
        if is_unit_word(word):
            return match["name"].strip(), word.strip()
    return header.strip(), ""


def split_headers(headers: Sequence[str]) -> tuple[list[str], list[str]]:
    """Return names and units of all columns.

    Parameters
    ----------
    headers : sequence of str
        The fields of a header line.

    Returns
    -------
    tuple of (list of str, list of str)
        Names and words for units. Columns that only their units tell apart keep their whole header
        as name.
    """
    parts = [split_header(header) for header in headers]
    names = [name for name, _ in parts]
    for k, header in enumerate(headers):
        if parts[k][1] and [name for name, _ in parts].count(parts[k][0]) > 1:
            names[k] = header.strip()
    return names, [unit for _, unit in parts]


def bare_name(wanted: str, names: Sequence[str]) -> str:
    """Return the name that a header stands for, where it is given with its unit.

    Parameters
    ----------
    wanted : str
        As a user writes it: ``"pd (V)"`` for the column ``"pd"``, or the name itself.
    names : sequence of str
        The columns there are.

    Returns
    -------
    str
        One of the names if there is such a one, else ``wanted``.
    """
    name = split_header(wanted)[0]
    return name if wanted not in names and name in names else wanted


def time_unit_s(name: str, word: str) -> tuple[float, bool] | None:
    """Return the unit of a time column.

    Parameters
    ----------
    name : str
        The column's name.
    word : str
        The word for its unit, empty where there is none.

    Returns
    -------
    tuple of (float, bool), or None
        The unit in seconds and whether it was stated (else seconds are assumed); None where
        neither name nor unit is one of time.
    """
    if word.strip(" -[]()"):
        found = si_unit(word)
        return (found[1], True) if found and found[0] == "s" else None
    match = _TIME_NAME.fullmatch(name.strip())
    if match is None:
        return None
    stated = match["unit"] or re.sub(r"^.*[ _-]", "", name.strip())
    spelled = WORDS.get(stated.lower(), stated.lower().replace("µ", "u"))
    unit_s = _TIME_UNITS_S.get(spelled)
    return (unit_s or 1.0, unit_s is not None)
