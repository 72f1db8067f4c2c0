"""Options that commands share: the bench and its overrides, output, values with units."""

import functools
import logging
from collections.abc import Callable, Sequence
from typing import Any, NoReturn, TypeVar

import click

from metro.bench import Bench, BenchError, load_bench
from metro.bench_keys import KEYS, OPTIONS
from metro.diagnostics import set_up_logging
from metro.example_command import ExampleCommand, command
from metro.value_type import ValueType, option_name

__all__ = [
    "ExampleCommand",
    "ValueType",
    "bench_options",
    "command",
    "distrust",
    "is_quiet",
    "is_verbose",
    "option_name",
    "output_options",
]

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
        return _with_own_files(function) if {"out", "plot"} <= set(names) else function

    return add


def _with_own_files(function: F) -> F:
    """Refuse one file for two outputs, and say of a failed one what was written before it."""

    @functools.wraps(function)
    def with_own_files(*args: Any, **kwargs: Any) -> Any:  # noqa: ANN401  # any command
        from metro.output_files import check_distinct, telling_what_is_kept

        files = {f"--{name}": kwargs.get(name) for name in ("out", "plot")}
        check_distinct(files)
        with telling_what_is_kept(files):
            return function(*args, **kwargs)

    return with_own_files  # type: ignore[return-value]  # the same signature


def _remember(meta: str, ctx: click.Context, param: click.Parameter, value: bool) -> None:  # noqa: ARG001  # click's callback
    ctx.meta[meta] = value
    if ctx.meta.get(_QUIET) and ctx.meta.get(_VERBOSE):
        raise click.UsageError("--quiet and --verbose exclude each other, got both", ctx)
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
