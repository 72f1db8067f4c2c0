"""Options that commands share: the bench and its overrides, output, values with units."""

import functools
import logging
from collections.abc import Callable, Sequence
from typing import TYPE_CHECKING, Any, NoReturn, TypeVar

import click

from metro.bench import Bench, BenchError, load_bench
from metro.bench_keys import KEYS, OPTIONS
from metro.diagnostics import set_up_logging
from metro.errors import MetroError
from metro.units import si

__all__ = [
    "ValueType",
    "bench_options",
    "command",
    "distrust",
    "is_quiet",
    "is_verbose",
    "output_options",
]

if TYPE_CHECKING:
    _ParamType = click.ParamType[Any]
else:
    _ParamType = click.ParamType  # not generic before click 8.2

F = TypeVar("F", bound=Callable[..., Any])

_OVERRIDE_HELP = {
    "arm": "Arm length.",
    "wavelength": "Vacuum wavelength.",
    "round-trips": "Round trips in each arm.",
    "contrast": "Fringe contrast.",
    "power": "Mean optical power on the photodiode at mid-fringe.",
    "responsivity": "Photodiode responsivity.",
    "quantum-efficiency": "Photodiode quantum efficiency, a fraction.",
    "transimpedance": "Transimpedance.",
    "adc-bits": "ADC bits.",
    "adc-range": "ADC full range.",
    "temperature": "Air temperature.",
    "pressure": "Air pressure.",
    "humidity": "Relative humidity.",
    "low": "Fringe minimum.",
    "high": "Fringe maximum.",
}
_QUIET = "metro.quiet"
_VERBOSE = "metro.verbose"


class ValueType(_ParamType):
    """An option value with a unit, returned as a float in SI.

    Parameters
    ----------
    unit : str
        The SI unit, such as ``"m"``.
    name : str, optional
        What help shows for the value.
    minimum, maximum : float, optional
        Closed bounds, in ``unit``.
    above, below : float, optional
        Open bounds, in ``unit``.
    """

    def __init__(
        self,
        unit: str,
        name: str = "VALUE",
        *,
        minimum: float | None = None,
        maximum: float | None = None,
        above: float | None = None,
        below: float | None = None,
    ) -> None:
        self.unit = unit
        self.name = name
        self.minimum, self.maximum = minimum, maximum
        self.above, self.below = above, below

    def convert(
        self,
        value: Any,  # noqa: ANN401  # text from the command line, or a default
        param: click.Parameter | None,
        ctx: click.Context | None,  # noqa: ARG002  # click's signature
    ) -> Any:  # noqa: ANN401  # a float
        """Return the value in SI.

        Parameters
        ----------
        value : str or float
            As given; a float is a default already in SI.
        param : click.Parameter, optional
            The option, for its name.
        ctx : click.Context, optional
            Not used.

        Returns
        -------
        float
            In the unit of this type.

        Raises
        ------
        MetroError
            If it is no such value.
        """
        if isinstance(value, float):
            return value
        name = option_name(param)
        if isinstance(value, str) and value.startswith("--"):
            raise MetroError(f"{name} needs a value, got the option {value!r}")
        return si(
            value,
            name,
            self.unit,
            minimum=self.minimum,
            maximum=self.maximum,
            above=self.above,
            below=self.below,
        )


def option_name(param: click.Parameter | None) -> str:
    """Return what messages call a parameter.

    Parameters
    ----------
    param : click.Parameter, optional
        An option or an argument.

    Returns
    -------
    str
        Such as ``"--arm"``.
    """
    if param is None:
        return "value"
    if isinstance(param, click.Option):
        return max(param.opts, key=len)
    return (param.name or "value").upper()


class ExampleCommand(click.Command):
    """A command whose help ends with the bench's options apart and one example to run.

    Parameters
    ----------
    *args : object
        As click.Command takes them.
    example : str
        One line that can be run.
    **kwargs : object
        As click.Command takes them.
    """

    def __init__(self, *args: Any, example: str = "", **kwargs: Any) -> None:  # noqa: ANN401  # click's own
        super().__init__(*args, **kwargs)
        self.example = example

    def format_options(self, ctx: click.Context, formatter: click.HelpFormatter) -> None:
        """Write the options, those of the bench in a section of their own.

        Parameters
        ----------
        ctx : click.Context
            Of this command.
        formatter : click.HelpFormatter
            Takes the text.
        """
        bench = {"bench", *(name.replace("-", "_") for name in OPTIONS)}
        own: list[tuple[str, str]] = []
        shared: list[tuple[str, str]] = []
        has_bench = any(param.name == "bench_file" for param in self.params)
        for param in self.get_params(ctx):
            record = param.get_help_record(ctx)
            if record is not None:
                of_bench = has_bench and param.name in bench | {"bench_file"}
                (shared if of_bench else own).append(record)
        for title, records in (("Options", own), ("The bench", shared)):
            if records:
                with formatter.section(title):
                    formatter.write_dl(records)

    def format_epilog(self, ctx: click.Context, formatter: click.HelpFormatter) -> None:
        """Write the example, unwrapped so that it can be copied.

        Parameters
        ----------
        ctx : click.Context
            Of this command.
        formatter : click.HelpFormatter
            Takes the text.
        """
        super().format_epilog(ctx, formatter)
        if self.example:
            formatter.write(f"\nExample:\n  {self.example}\n")


def command(example: str, **settings: Any) -> Callable[[F], click.Command]:  # noqa: ANN401  # click's own
    """Return the decorator that makes a function a command with an example in its help.

    Parameters
    ----------
    example : str
        One line that can be run.
    **settings : object
        As click.command takes them.

    Returns
    -------
    callable
        The decorator.
    """
    return click.command(
        cls=ExampleCommand,
        example=example,
        context_settings={"help_option_names": ["-h", "--help"], "max_content_width": 100},
        **settings,
    )


def bench_options(function: F) -> F:
    """Add ``--bench`` and every override, and pass the resulting bench as ``bench``.

    Parameters
    ----------
    function : callable
        Takes ``bench``, a :class:`metro.bench.Bench`.

    Returns
    -------
    callable
        Takes the options instead.
    """

    @functools.wraps(function)
    def with_bench(*args: Any, **kwargs: Any) -> Any:  # noqa: ANN401  # any command
        given = {option: kwargs.pop(option.replace("-", "_")) for option in OPTIONS}
        bench = _bench_of(kwargs.pop("bench_file"))
        return function(*args, bench=bench.override(given), **kwargs)

    for option, key in reversed(OPTIONS.items()):
        example = KEYS[key].example
        text = f"{_OVERRIDE_HELP[option]} Such as {example}."
        with_bench = click.option(f"--{option}", metavar="VALUE", help=text)(with_bench)
    return click.option(
        "--bench",
        "bench_file",
        metavar="FILE",
        help="The bench file; without it $MIDFRINGE_BENCH, else none.",
    )(with_bench)  # type: ignore[return-value]  # the options stand for the bench


def _bench_of(path: str | None) -> Bench:
    import os

    if path is not None:
        return load_bench(path)
    path = os.environ.get("MIDFRINGE_BENCH")
    if not path:
        return Bench()
    try:
        return load_bench(path)
    except BenchError as error:
        raise BenchError(f"$MIDFRINGE_BENCH: {error}") from None


_OUTPUT = {
    "out": (("--out",), {"metavar": "FILE", "help": "Write the result to this file."}),
    "plot": (("--plot",), {"metavar": "FILE", "help": "Draw the result into this file."}),
    "json": (
        ("--json", "as_json"),
        {"is_flag": True, "help": "One JSON document on standard output."},
    ),
    "overwrite": (("--overwrite",), {"is_flag": True, "help": "Replace files that exist."}),
}


def output_options(*names: str) -> Callable[[F], F]:
    """Return the decorator that adds output options, ``--quiet`` and ``--verbose`` always.

    Parameters
    ----------
    *names : str
        Of ``"out"``, ``"plot"``, ``"json"`` (passed as ``as_json``) and ``"overwrite"``.

    Returns
    -------
    callable
        The decorator. ``--quiet`` and ``--verbose`` set up logging and are not passed on; see
        :func:`is_quiet` and :func:`is_verbose`.
    """

    def add(function: F) -> F:
        for flag, meta, text in (
            ("--verbose", _VERBOSE, "Say more on standard error."),
            ("--quiet", _QUIET, "Say only errors on standard error."),
        ):
            function = click.option(
                f"-{flag[2]}",
                flag,
                is_flag=True,
                expose_value=False,
                help=text,
                callback=functools.partial(_remember, meta),
            )(function)
        for name in reversed(names):
            declarations, settings = _OUTPUT[name]
            function = click.option(*declarations, **settings)(function)  # type: ignore[arg-type]  # one table for all
        return function

    return add


def _remember(meta: str, ctx: click.Context, param: click.Parameter, value: bool) -> None:  # noqa: ARG001  # click's callback
    ctx.meta[meta] = value
    level = logging.WARNING
    if ctx.meta.get(_QUIET):
        level = logging.ERROR
    elif ctx.meta.get(_VERBOSE):
        level = logging.INFO
    set_up_logging(level)


def is_quiet() -> bool:
    """Return whether ``--quiet`` was given to the running command.

    Returns
    -------
    bool
        False outside a command.
    """
    ctx = click.get_current_context(silent=True)
    return bool(ctx is not None and ctx.meta.get(_QUIET))


def is_verbose() -> bool:
    """Return whether ``--verbose`` was given to the running command.

    Returns
    -------
    bool
        False outside a command.
    """
    ctx = click.get_current_context(silent=True)
    return bool(ctx is not None and ctx.meta.get(_VERBOSE))


def distrust(reasons: Sequence[str]) -> NoReturn:
    """Say on standard error why a result must not be trusted, and end with exit code 1.

    Parameters
    ----------
    reasons : sequence of str
        One line each.
    """
    for reason in reasons:
        click.echo(f"not to be trusted: {' '.join(reason.split())}", err=True)
    raise click.exceptions.Exit(1)
