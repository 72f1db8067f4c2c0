"""Moments as the ledger keeps them: UTC, ISO 8601, to the microsecond, so that they sort as text."""

import time
from datetime import UTC, datetime

from calibration.desk.ledger_errors import LedgerError

__all__ = ["iso_of", "now", "parse_time", "unix_of"]


def iso_of(unix_s: float) -> str:
    """Return a moment as the ledger keeps it.

    Parameters
    ----------
    unix_s : float
        Seconds since 1970-01-01 00:00 UTC.

    Returns
    -------
    str
        Such as ``"2026-03-01T12:00:00.000000+00:00"``.
    """
    return datetime.fromtimestamp(unix_s, UTC).isoformat(timespec="microseconds")


def unix_of(iso: str) -> float:
    """Return the seconds since 1970 of a moment as the ledger keeps it.

    Parameters
    ----------
    iso : str
        From :func:`iso_of` or :func:`parse_time`.

    Returns
    -------
    float
        Seconds since 1970-01-01 00:00 UTC.
    """
    return datetime.fromisoformat(iso).timestamp()


def parse_time(text: str, name: str) -> str:
    """Return a moment that someone wrote, as the ledger keeps it.

    Parameters
    ----------
    text : str
        ISO 8601: a date alone is its first moment; without an offset it is UTC.
    name : str
        What it is, for the message.

    Returns
    -------
    str
        UTC to the microsecond.

    Raises
    ------
    LedgerError
        If it is no moment.
    """
    try:
        moment = datetime.fromisoformat(text.strip())
        if moment.tzinfo is None:
            moment = moment.replace(tzinfo=UTC)
        return moment.astimezone(UTC).isoformat(timespec="microseconds")
    except (ValueError, OverflowError):
        raise LedgerError(
            f"{name} must be a time in ISO 8601, such as 2026-03-01T12:00:00Z, got {text!r}"
        ) from None


def now() -> str:
    """Return the present moment as the ledger keeps times."""
    return iso_of(time.time())
