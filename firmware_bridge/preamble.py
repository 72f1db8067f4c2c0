"""What the lines before the data say: the sampling rate that an instrument writes there."""

import itertools
import re
from collections.abc import Sequence

from firmware_bridge.unit_word import si_unit

__all__ = ["maybe_stated_rate_hz"]

_VALUE = (
    r"[^\d\n]*?[\s,;:=\t\"]+(?P<value>[+-]?[\d.]+(?:[eE][+-]?\d+)?)[\s,;\"]*(?P<unit>[^\W\d_]*)"
)
_INTERVAL = re.compile(
    r"(?:sampl\w*[ _-]*(?:interval|period|time)|x[ _-]?incr\w*|delta[ _-]?[tx]|\bd[tx])\b" + _VALUE,
    re.IGNORECASE,
)
_RATE = re.compile(
    r"(?:sampl\w*[ _-]*(?:rate|freq\w*)|\brate|\bfs|\brate_hz)\b" + _VALUE, re.IGNORECASE
)
_INCREMENT = re.compile(
    r"(?:x[ _-]?)?incr\w*|sampl\w*[ _-]*(?:interval|period)|d[tx]", re.IGNORECASE
)
_LONE = re.compile(r"(?P<value>[+-]?[\d.]+(?:[eE][+-]?\d+)?)\s*(?P<unit>[^\W\d_]*)")


def maybe_stated_rate_hz(preamble: Sequence[str]) -> float | None:
    """Return the sampling rate that the lines before the data state.

    Parameters
    ----------
    preamble : sequence of str
        The lines before the data.

    Returns
    -------
    float or None
        Samples per second; None where no line states a rate or a sampling interval.
    """
    for line in preamble:
        rate = _RATE.search(line)
        if rate and (value := _in_unit(rate, "Hz")):
            return value
        interval = _INTERVAL.search(line)
        if interval and (value := _in_unit(interval, "s")):
            return 1.0 / value
    return _interval_below(preamble)


def _interval_below(preamble: Sequence[str]) -> float | None:
    """Return the rate where a column is headed "Increment" and holds it on the next line alone."""
    for head, below in itertools.pairwise(preamble):
        names, values = (re.split(r"[,;\t]", line) for line in (head, below))
        for name, value in zip(names, values, strict=False):
            if not _INCREMENT.fullmatch(name.strip(' "')):
                continue
            match = _LONE.fullmatch(value.strip(' "'))
            if match and (interval := _in_unit(match, "s")):
                return 1.0 / interval
    return None


def _in_unit(match: re.Match[str], unit: str) -> float | None:
    """Return the positive value of a match in a unit, None where it has another dimension."""
    try:
        value = float(match["value"])
    except ValueError:
        return None
    found = si_unit(match["unit"]) if match["unit"] else (unit, 1.0, 0.0)
    if found is None or found[0] != unit or not 0 < value * found[1] < float("inf"):
        return None
    return value * found[1]
