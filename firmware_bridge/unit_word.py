"""Words for units, as the headers of recordings write them."""

import re
from functools import cache

from metro.errors import MetroError

__all__ = ["WORDS", "is_unit_word", "si_unit"]

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
WORDS = {word: unit for unit, words in _SYNONYMS.items() for word in words.split()} | {"": "1"}
"""Words in lower case, and the unit each stands for."""
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
_LETTERS = re.compile(r"[^\W\d_]+")
_SCALED = re.compile(
    r"(?:da|[fpnumcdhkMGT])?(?:V|A|W|s|Hz|m|rad|K|Pa|N|J|g|T|F|C|S|H|eV|mol|ohm)|per"
)
_SHORT = 3  # letters


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
    spelled = WORDS.get(bare.lower(), bare)
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
    known = letters in _SYMBOLS or letters.lower() in WORDS or _SCALED.fullmatch(letters)
    return len(letters) > _SHORT or bool(known)
