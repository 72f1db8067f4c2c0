"""How results of a ledger are judged: the options on temperature and alarms, and their values."""

import functools
from collections.abc import Callable
from dataclasses import dataclass
from typing import TYPE_CHECKING, Any, TypeVar

import click

from calibration.desk.ledger_errors import LedgerError

if TYPE_CHECKING:
    from calibration.desk.cusum import CusumRule
    from calibration.desk.temperature_law import TemperatureLaw

__all__ = ["Judging", "judging_options"]

F = TypeVar("F", bound=Callable[..., Any])

_LONGEST_RUN = 1e12


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
