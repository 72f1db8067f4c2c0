"""Calendar stamps at the beginning of lines, as loggers print them, to seconds since 1970."""

import re
from datetime import UTC, datetime

__all__ = ["stamps_to_seconds"]

# ISO 8601: 2023-01-05T12:00:00.250Z, also with a blank for the T and a comma for the point.
_STAMP = re.compile(
    rb'^([ \t]*)"?(\d{4}-\d\d-\d\d)[T ](\d\d:\d\d:\d\d)(?:[.,](\d{1,12}))?[ ]?(Z|[+-]\d\d:?\d\d)?"?'
    rb"(?=[ \t,;|])",
    re.MULTILINE,
)
_PROBE_BYTES = 65536
_FEW = 2  # stamps in a file's first lines: fewer are a date in a preamble


def stamps_to_seconds(data: bytes, fewest: int = _FEW) -> bytes:
    """Return a text with the calendar stamps at the beginning of its lines as seconds since 1970.

    Parameters
    ----------
    data : bytes
        As :func:`firmware_bridge.text_encoding.plain_text` returns it.
    fewest : int
        How many of its lines must begin so.

    Returns
    -------
    bytes
        The same where lines do not begin so. Fractions keep their digits; a stamp without a time
        zone is taken as UTC, and one that is no date is left as it is.

    References
    ----------
    ISO 8601-1:2019, 5.4 (date and time of day).
    """
    if len(_STAMP.findall(data, 0, _PROBE_BYTES)) < fewest:
        return data
    return _STAMP.sub(_seconds, data)


def _seconds(match: re.Match[bytes]) -> bytes:
    blank, day, clock, fraction, zone = match.groups()
    text = b"%s %s%s" % (day, clock, (zone or b"").replace(b"Z", b"+00:00"))
    try:
        moment = datetime.fromisoformat(text.decode("ascii"))
    except ValueError:
        return match[0]
    if moment.tzinfo is None:
        moment = moment.replace(tzinfo=UTC)
    whole = b"%d" % round(moment.timestamp())
    return blank + whole + (b"." + fraction if fraction else b"")
