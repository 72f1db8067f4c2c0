"""Names and units of columns, as the headers of recordings write them."""

import re
from collections.abc import Sequence
from functools import cache

from metro.errors import MetroError

__all__ = ["bare_name", "is_unit_word", "si_unit", "split_header", "split_headers", "time_unit_s"]

# Words that instruments and sketches print, beside what the unit registry reads.
_SYNONYMS = {
    "V": "volt volts",
    "mV": "millivolt millivolts",
    "uV": "microvolt microvolts",
    "A": "ampere amperes amp amps",
    "W": "watt watts",
    "s": "second seconds sec secs sekunde sekunden",
    "ms": "millisecond milliseconds msec millis",
    "us": "microsecond microseconds usec micros",
    "ns": "nanosecond nanoseconds nsec",
    "min": "minute minutes",
    "h": "hour hours",
    "Hz": "hertz",
    "ohm": "ohms",
    "deg": "degrees",
    "m": "metres meters",
    "count": "counts lsb lsbs",
    "1": "- -- 1 none a.u. arb",
}
_WORDS = {word: unit for unit, words in _SYNONYMS.items() for word in words.split()} | {"": "1"}
# Single words are units only if they are among these: the registry would read "pd" as a picoday.
_SYMBOLS = frozenset(
    [
        "V",
        "mV",
        "uV",
        "nV",
        "kV",
        "A",
        "mA",
        "uA",
        "nA",
        "pA",
        "W",
        "mW",
        "uW",
        "nW",
        "s",
        "ms",
        "us",
        "ns",
        "min",
        "h",
        "Hz",
        "mHz",
        "kHz",
        "MHz",
        "GHz",
        "m",
        "km",
        "cm",
        "mm",
        "um",
        "nm",
        "pm",
        "fm",
        "rad",
        "mrad",
        "urad",
        "deg",
        "degC",
        "degF",
        "K",
        "mK",
        "Pa",
        "hPa",
        "kPa",
        "bar",
        "mbar",
        "ohm",
        "kohm",
        "Mohm",
        "F",
        "pF",
        "nF",
        "uF",
        "N",
        "mN",
        "J",
        "g",
        "kg",
        "T",
        "mT",
        "percent",
        "ppm",
        "ppb",
        "bit",
        "fringe",
    ]
)
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


_LETTERS = re.compile(r"[^\W\d_]+")
_SCALED = re.compile(
    r"(?:da|[fpnumcdhkMGT])?(?:V|A|W|s|Hz|m|rad|K|Pa|N|J|g|T|F|C|S|H|eV|mol|ohm)|per"
)
_SHORT = 3  # letters


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


def is_unit_word(word: str) -> bool:
    """Tell whether a word is a unit that the program knows.

    Parameters
    ----------
    word : str
        Such as ``"Volt"``, ``"mV"``, ``"-"``.

    Returns
    -------
    bool
        True for a known unit, also for a mark of no unit.
    """
    return si_unit(word) is not None


@cache
def si_unit(word: str) -> tuple[str, float, float] | None:
    """Return the SI unit that a word stands for, and what brings a magnitude there.

    Parameters
    ----------
    word : str
        Such as ``"Volt"`` or ``"mV"``.

    Returns
    -------
    tuple of (str, float, float), or None
        Unit, factor and offset, ``magnitude * factor + offset`` in that unit; None where the word
        is no known unit.
    """
    bare = word.strip().strip("[]()").strip()
    spelled = _WORDS.get(bare.lower(), bare)
    if spelled in {"1", "count"}:
        return "1", 1.0, 0.0
    from metro.si_form import si_form
    from metro.units import parse_quantity
    from metro.value_text import spell_unit

    if len(spelled) > 40 or not re.match(r"[^\W\d_]|[%°‰√/1]", spelled):
        return None
    plain = spell_unit(spelled)
    if plain.isalnum() and plain not in _SYMBOLS:
        return None
    if not all(map(_is_symbol, _LETTERS.findall(plain))):
        return None
    try:
        return si_form(parse_quantity(f"1 {spelled}").units)
    except MetroError:
        return None


def _is_symbol(letters: str) -> bool:
    """Tell whether a part of a compound unit is one of the trade's, and no chance reading.

    The registry reads the "pd" of "pd/V" as a picoday and the "dac" of "dac/V" as ten speeds of
    light; longer words are rarely read by chance.
    """
    known = letters in _SYMBOLS or letters.lower() in _WORDS or _SCALED.fullmatch(letters)
    return len(letters) > _SHORT or bool(known)


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
    spelled = _WORDS.get(stated.lower(), stated.lower().replace("µ", "u"))
    unit_s = _TIME_UNITS_S.get(spelled)
    return (unit_s or 1.0, unit_s is not None)
