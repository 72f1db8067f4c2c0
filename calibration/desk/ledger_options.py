"""Options that the commands of the ledger share: which one, which bench, how results are judged."""

import functools
import os
from collections.abc import Callable
from dataclasses import dataclass
from typing import TYPE_CHECKING, Any, TypeVar

import click

from calibration.desk.ledger_errors import LedgerError
from metro.options import ValueType, is_quiet

if TYPE_CHECKING:
    from collections.abc import Sequence

    from calibration.desk.cusum import CusumRule
    from calibration.desk.line_entry import LineEntry
    from calibration.desk.temperature_law import TemperatureLaw
    from calibration.record import Calibration

__all__ = [
    "Judging",
    "Sourcing",
    "judging_options",
    "ledger_options",
    "ledger_place",
    "moment",
    "since_options",
    "sourcing_options",
    "tell",
]

F = TypeVar("F", bound=Callable[..., Any])

VARIABLE = "MIDFRINGE_LEDGER"
_LONGEST_RUN = 1e12


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


@dataclass(frozen=True, slots=True)
class Judging:
    """How results are judged: the values of the options.

    Parameters
    ----------
    coefficient, coefficient_u : str or None
        Relative change of a result a kelvin, ``"fit"``, and its u.
    run_length : float
        Results between two false alarms, on average.
    """

    coefficient: str | None
    coefficient_u: str | None
    run_length: float

    @property
    def law(self) -> "TemperatureLaw":
        """How results follow temperature."""
        from calibration.desk.temperature_law import parse_law

        return parse_law(self.coefficient, self.coefficient_u)

    @property
    def rule(self) -> "CusumRule":
        """When an alarm is raised."""
        from calibration.desk.cusum import CusumRule

        if not 10.0 <= self.run_length <= _LONGEST_RUN:
            raise LedgerError(
                f"--run-length must be from 10 to {_LONGEST_RUN:g} results, got {self.run_length:g}"
            )
        return CusumRule.for_run_length(self.run_length)


@dataclass(frozen=True, slots=True)
class Sourcing:
    """How a file of results is read: the values of the options.

    Parameters
    ----------
    time : str or None
        When it was measured, where it does not say.
    temperature_k : float or None
        Temperature meanwhile [K].
    slope : str
        The side of the fringe of a recording.
    lines_hz : tuple of float
        Lines of a recording [Hz]; empty for those of the calibration.
    """

    time: str | None
    temperature_k: float | None
    slope: str
    lines_hz: tuple[float, ...]

    def entries(
        self, path: str, calibration: "Calibration | None", bench: str, time: str | None = None
    ) -> "list[LineEntry]":
        """Return the line results in a file.

        Parameters
        ----------
        path : str
            JSON from ``midfringe lines``, or a recording.
        calibration : Calibration or None
            In force: turns a recording's volts into metres.
        bench : str
            Which bench.
        time : str, optional
            When it was measured, if nothing else says.

        Returns
        -------
        list of LineEntry
            One a line.

        Raises
        ------
        LedgerError
            If no line is named, the file holds none, or nothing says when it was measured.
        """
        from calibration.desk.intake_of_files import is_document, result_entries
        from calibration.desk.measured_lines import Measuring

        lines_hz = self.lines_hz
        if not lines_hz and calibration is not None:
            lines_hz = tuple(float(line.frequency.magnitude) for line in calibration.actuator)
        if not lines_hz and not is_document(path):
            raise LedgerError(
                f"{path}: no calibration is in force, so --line must name its lines, got none"
            )
        return result_entries(
            path,
            measuring=Measuring(lines_hz, calibration, self.slope),
            time=self.time or time,
            temperature_k=self.temperature_k,
            bench=bench,
        )


def sourcing_options(function: F) -> F:
    """Add the options on how a file of results is read; pass them as ``sourcing``.

    Parameters
    ----------
    function : callable
        Takes ``sourcing``, a `Sourcing`.

    Returns
    -------
    callable
        Takes the options instead.
    """

    @functools.wraps(function)
    def with_sourcing(*args: Any, **kwargs: Any) -> Any:  # noqa: ANN401  # any command
        names = ("time", "temperature_k", "slope", "lines_hz")
        given = {name: kwargs.pop(name) for name in names}
        return function(*args, sourcing=Sourcing(**given), **kwargs)

    wrapped: Any = with_sourcing
    for declaration, name, settings in (_SLOPE, _LINE, _TEMPERATURE, _TIME):
        wrapped = click.option(declaration, name, **settings)(wrapped)
    return wrapped  # type: ignore[no-any-return]  # the options stand for ``sourcing``


_Option = tuple[str, str, dict[str, Any]]
_TIME: _Option = (
    "--time",
    "time",
    {"metavar": "TIME", "help": "When the lines were measured, where their file does not say."},
)
_TEMPERATURE: _Option = (
    "--temperature",
    "temperature_k",
    {
        "type": ValueType("K", above=0.0),
        "metavar": "VALUE",
        "help": "Temperature at the lines, such as 21.3degC.",
    },
)
_LINE: _Option = (
    "--line",
    "lines_hz",
    {
        "type": ValueType("Hz", above=0.0),
        "multiple": True,
        "metavar": "F",
        "help": "Lines of a recording; repeatable. Default: those of the calibration in force.",
    },
)
_SLOPE: _Option = (
    "--slope",
    "slope",
    {
        "type": click.Choice(["rising", "falling"]),
        "default": "rising",
        "show_default": True,
        "help": "The side of the fringe that a recording lies on.",
    },
)


def judging_options(function: F) -> F:
    """Add the options on temperature and alarms; pass them as ``judging``.

    Parameters
    ----------
    function : callable
        Takes ``judging``, a `Judging`.

    Returns
    -------
    callable
        Takes the options instead.
    """

    @functools.wraps(function)
    def with_judging(*args: Any, **kwargs: Any) -> Any:  # noqa: ANN401  # any command
        names = ("coefficient", "coefficient_u", "run_length")
        given = {name: kwargs.pop(name) for name in names}
        return function(*args, judging=Judging(**given), **kwargs)

    wrapped: Any = with_judging
    for declaration, name, settings in (
        (
            "--run-length",
            "run_length",
            {
                "type": float,
                "default": 100_000.0,
                "metavar": "N",
                "help": "Results between two false alarms, on average: 100000.",
            },
        ),
        (
            "--coefficient-u",
            "coefficient_u",
            {"metavar": "VALUE", "help": "Its standard uncertainty, such as 10ppm/K."},
        ),
        (
            "--temperature-coefficient",
            "coefficient",
            {
                "metavar": "VALUE",
                "help": "Relative change of the line a kelvin, such as -120ppm/K, or fit.",
            },
        ),
    ):
        wrapped = click.option(declaration, name, **settings)(wrapped)
    return wrapped  # type: ignore[no-any-return]  # the options stand for ``judging``


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
