"""From the text of a bench file to checked entries."""

import re
from collections.abc import Mapping
from itertools import pairwise
from typing import Any

from metro.bench_entry import (
    NORMAL,
    RECTANGULAR,
    BenchError,
    BenchLine,
    Entry,
    MotionPoint,
    nearest,
)
from metro.bench_keys import KEYS, LINE_KEYS, MOTION_KEYS, Key
from metro.errors import MetroError
from metro.measured import Measured
from metro.units import si

__all__ = ["read_entry", "read_sections"]

_TABLE_KEYS = ("value", "u", "distribution", "source")
_DISTRIBUTIONS = (NORMAL, RECTANGULAR)


def read_sections(
    document: Mapping[str, Any], path: str
) -> tuple[dict[str, Entry], tuple[BenchLine, ...], tuple[MotionPoint, ...]]:
    """Return the entries, lines and motion of a bench file's document.

    Parameters
    ----------
    document : mapping
        As TOML gives it.
    path : str
        The file, for messages.

    Returns
    -------
    tuple of (dict of str to Entry, tuple of BenchLine, tuple of MotionPoint)
        The values by ``section.key``, the drive lines, and the arms' own motion by frequency.

    Raises
    ------
    BenchError
        If a key is unknown or a value breaks its rule.
    """
    entries: dict[str, Entry] = {}
    lines: tuple[BenchLine, ...] = ()
    motion: tuple[MotionPoint, ...] = ()
    for section, content in document.items():
        if section == "line":
            lines = _read_lines(content, path)
        elif section == "motion":
            motion = _read_motion(content, path)
        elif section == "format":
            _check_format(content, path)
        else:
            entries.update(_read_section(section, content, path))
    return entries, lines, motion


def _check_format(version: object, path: str) -> None:
    if version != 1:
        raise BenchError(
            f"{path}: format must be 1, the only one this version reads, got {version!r}"
        )


def _read_section(section: str, content: object, path: str) -> dict[str, Entry]:
    sections = dict.fromkeys([key.partition(".")[0] for key in KEYS] + ["line", "motion"])
    if section not in sections:
        raise BenchError(f"{path}: unknown section [{section}]{nearest(section, sections)}")
    if not isinstance(content, dict):
        raise BenchError(f"{path}: {section} must be a section [{section}], got {content!r}")
    names = [key.partition(".")[2] for key in KEYS if key.startswith(section + ".")]
    entries = {}
    for name, value in content.items():
        where = f"{path}, [{section}] {name}"
        if name not in names:
            raise BenchError(f"{path}, [{section}]: unknown key {name!r}{nearest(name, names)}")
        entries[f"{section}.{name}"] = read_entry(f"{section}.{name}", value, where, where)
    return entries


def _read_lines(content: object, path: str) -> tuple[BenchLine, ...]:
    if not isinstance(content, list) or not all(isinstance(item, dict) for item in content):
        raise BenchError(f"{path}: drive lines must be written as [[line]], got {content!r}")
    return tuple(_read_line(item, f"{path}, [[line]] {n}") for n, item in enumerate(content, 1))


def _read_line(item: Mapping[str, Any], where: str) -> BenchLine:
    for name in item:
        if name not in LINE_KEYS:
            raise BenchError(f"{where}: unknown key {name!r}{nearest(name, LINE_KEYS)}")
    if "frequency" not in item:
        raise BenchError(f'{where}: must give a frequency, such as frequency = "87.1 Hz"')
    frequency, _ = _line_value(item, "frequency", where)
    if "drive" not in item:
        return BenchLine(frequency)
    return BenchLine(frequency, *_line_value(item, "drive", where))


def _read_motion(content: object, path: str) -> tuple[MotionPoint, ...]:
    if not isinstance(content, list) or not all(isinstance(item, dict) for item in content):
        raise BenchError(f"{path}: the arms' motion must be written as [[motion]], got {content!r}")
    points = [_read_point(item, f"{path}, [[motion]] {n}") for n, item in enumerate(content, 1)]
    points.sort(key=lambda point: point.frequency_hz)
    for one, two in pairwise(points):
        if one.frequency_hz == two.frequency_hz:
            raise BenchError(f"{path}: [[motion]] is given twice at {one.frequency_hz:g} Hz")
    return tuple(points)


def _read_point(item: Mapping[str, Any], where: str) -> MotionPoint:
    for name in item:
        if name not in MOTION_KEYS:
            raise BenchError(f"{where}: unknown key {name!r}{nearest(name, MOTION_KEYS)}")
    for name, rule in MOTION_KEYS.items():
        if name not in item:
            raise BenchError(f'{where}: must give a {name}, such as {name} = "{rule.example}"')
    return MotionPoint(*(_number(rule, item[n], f"{where} {n}") for n, rule in MOTION_KEYS.items()))


def _line_value(item: Mapping[str, Any], name: str, where: str) -> tuple[float, float]:
    rule, value, where = LINE_KEYS[name], item[name], f"{where} {name}"
    if not isinstance(value, Mapping):
        return _number(rule, value, where), 0.0
    measured = _read_table(rule, value, where, where).value
    if not isinstance(measured, Measured):
        raise TypeError(where)  # a line's keys all have units
    return measured.magnitude, measured.u_magnitude or 0.0


def read_entry(key: str, value: object, where: str, source: str) -> Entry:
    """Return the checked entry of one key.

    Parameters
    ----------
    key : str
        ``section.key``.
    value : object
        Text with a unit, a number, or a table with ``value``, ``u``, ``distribution``, ``source``.
    where : str
        What the message calls it.
    source : str
        Where it came from.

    Returns
    -------
    Entry
        In SI units.

    Raises
    ------
    BenchError
        If it breaks the key's rule.
    """
    rule = KEYS[key]
    if not rule.unit:
        text = _text(rule, value, where)
        return Entry(text, source, given=text)
    if isinstance(value, Measured):
        return Entry(value, source)
    if not isinstance(value, Mapping):
        measured = Measured.of(_number(rule, value, where), rule.unit)
        return Entry(measured, source, given=_written(value))
    return _read_table(rule, value, where, source)


def _written(value: object, u: object = None) -> str:
    text = f"{value:~}" if hasattr(value, "magnitude") else str(value)
    return text if u is None else f"{text}, u = {_written(u)}"


def _read_table(rule: Key, value: Mapping[str, Any], where: str, source: str) -> Entry:
    for name in value:
        if name not in _TABLE_KEYS:
            raise BenchError(f"{where}: unknown key {name!r}{nearest(name, list(_TABLE_KEYS))}")
    if "value" not in value:
        raise BenchError(f"{where}: must give a value, such as {{ value = {rule.example!r} }}")
    distribution = value.get("distribution", "normal")
    if distribution not in _DISTRIBUTIONS:
        raise BenchError(
            f"{where}: distribution must be 'normal' or 'rectangular', got {distribution!r}"
        )
    note = value.get("source", "")
    if not isinstance(note, str):
        raise BenchError(f"{where}: source must be text, got {note!r}")
    number = _number(rule, value["value"], where)
    u = None if value.get("u") is None else _uncertainty(rule, value["u"], number, where)
    given = _written(value["value"], value.get("u"))
    return Entry(Measured.of(number, rule.unit, u), source, distribution, note, given)


_RELATIVE = re.compile(r".*\d\s*(%|‰|percent|permille|ppm|ppb)\s*", re.DOTALL)


def _uncertainty(rule: Key, u: object, number: float, where: str) -> float:
    """Return u in the key's unit; a percentage or ppm of a value with a unit is relative to it."""
    where = f"{where} u"
    if not (isinstance(u, str) and _RELATIVE.fullmatch(u)):
        return float(_si(u, where, Key(rule.unit, rule.example, minimum=0.0), difference=True))
    share = float(_si(u, where, Key("1", rule.example, minimum=0.0)))
    if rule.unit == "1":
        if abs(number) > 1.0:  # 10 with u = 0.15 %: is it 0.015 or 0.0015?
            raise BenchError(
                f"{where} must be a bare number, as the value {number:g} is, got {u!r}"
            )
        return share
    if number == 0.0:
        raise BenchError(f"{where} must be in {rule.unit}, as a share of 0 is nothing, got {u!r}")
    return abs(number) * share


def _number(rule: Key, value: object, where: str) -> float:
    if rule.whole and rule.minimum == -1.0:
        number = float(_si(value, where, Key(rule.unit, rule.example)))
        if number not in (-1.0, 1.0):
            raise BenchError(f"{where} must be +1 or -1, got {value!r}")
        return number
    number = float(_si(value, where, rule))
    if rule.whole and number != int(number):
        raise BenchError(f"{where} must be a whole number, got {value!r}")
    return number


def _si(value: Any, where: str, rule: Key, *, difference: bool = False) -> Any:  # noqa: ANN401  # TOML gives anything
    if not isinstance(value, (str, int, float)) and not hasattr(value, "magnitude"):
        raise BenchError(f"{where} must be a value such as {rule.example!r}, got {value!r}")
    try:
        return si(
            value,
            where,
            rule.unit,
            minimum=rule.minimum,
            maximum=rule.maximum,
            above=rule.above,
            difference=difference,
        )
    except MetroError as error:
        raise BenchError(str(error)) from None


def _text(rule: Key, value: object, where: str) -> str:
    if isinstance(value, int) and not isinstance(value, bool) and not rule.choices:
        value = str(value)  # a channel may be named by its number
    if not isinstance(value, str):
        raise BenchError(f"{where} must be text such as {rule.example!r}, got {value!r}")
    if rule.choices and value not in rule.choices:
        allowed = " or ".join(repr(choice) for choice in rule.choices)
        raise BenchError(f"{where} must be {allowed}, got {value!r}")
    return value
