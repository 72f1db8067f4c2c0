"""How a file of line results is read: the options, and their values."""

import functools
from collections.abc import Callable
from dataclasses import dataclass
from typing import TYPE_CHECKING, Any, TypeVar

import click

from calibration.desk.ledger_errors import LedgerError
from metro.options import ValueType

if TYPE_CHECKING:
    from calibration.desk.line_entry import LineEntry
    from calibration.record import Calibration

__all__ = ["Sourcing", "sourcing_options"]

F = TypeVar("F", bound=Callable[..., Any])


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
