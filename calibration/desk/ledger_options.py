"""Options that the commands of the ledger share: which one, which bench, since when."""

import functools
import os
from collections.abc import Callable
from typing import TYPE_CHECKING, Any, TypeVar

import click

from calibration.desk.ledger_errors import LedgerError
from metro.options import is_quiet

if TYPE_CHECKING:
    from collections.abc import Sequence


__all__ = [
    "ledger_options",
    "ledger_place",
    "moment",
    "since_options",
    "tell",
]

F = TypeVar("F", bound=Callable[..., Any])

VARIABLE = "MIDFRINGE_LEDGER"


def ledger_place(given: str | None) -> str:
    """Return where the ledger is: as given, else ``$MIDFRINGE_LEDGER``.

    Parameters
    ----------
    given : str or None
        Of ``--ledger``.

    Returns
    -------
    str
        A file or URL.

    Raises
    ------
    LedgerError
        If neither says; no file is picked up silently.
    """
    place = given or os.environ.get(VARIABLE)
    if not place:
        raise LedgerError(f"--ledger is needed, a file or postgresql:// URL, or ${VARIABLE}")
    return place


def ledger_options(function: F) -> F:
    """Add ``--ledger`` and ``--bench-name``; pass them as ``ledger`` (a place) and ``bench_name``.

    Parameters
    ----------
    function : callable
        Takes ``ledger`` and ``bench_name`` (None where not given).

    Returns
    -------
    callable
        Takes the options instead.
    """

    @functools.wraps(function)
    def with_place(*args: Any, **kwargs: Any) -> Any:  # noqa: ANN401  # any command
        return function(*args, ledger=ledger_place(kwargs.pop("ledger")), **kwargs)

    named: Any = click.option(
        "--bench-name", metavar="NAME", help="Which bench, where several share a ledger."
    )(with_place)
    option: Any = click.option(
        "--ledger",
        metavar="PLACE",
        help=f"An SQLite file or a postgresql:// URL; without it ${VARIABLE}.",
    )
    return option(named)  # type: ignore[no-any-return]  # the options stand for the place


def since_options(function: Any) -> Any:  # noqa: ANN401  # a click decorator
    """Add --since and --until."""
    for name, text in (
        ("--until", "Only before this time, ISO 8601."),
        ("--since", "Only from this time on, ISO 8601 (UTC where it does not say)."),
    ):
        function = click.option(name, metavar="TIME", help=text)(function)
    return function


def moment(text: str | None, name: str) -> str | None:
    """Return the time that an option gives, as the ledger keeps times; None where not given."""
    from calibration.desk.utc import parse_time

    return None if text is None else parse_time(text, name)


def tell(lines: "Sequence[str]") -> None:
    """Print cautions on standard error, unless only errors are wanted."""
    if not is_quiet():
        for line in lines:
            click.echo(f"caution: {line}", err=True)
