"""The command line: finds commands by entry points, loads the one that is called, ends with a code.

Exit codes: 0 done; 1 done, but a result must not be trusted; 2 wrong input; 3 a device or file failed
midway; 130 interrupted. With 2 there is exactly one line on stderr.
"""

import errno
import os
import sys
from collections.abc import Sequence
from difflib import get_close_matches
from typing import NoReturn

import click

from metro.diagnostics import set_up_logging
from metro.errors import MidfringeError
from metro.lazy_group import PROGRAM, LazyGroup
from metro.unit_registry import load_lean

__all__ = ["cli", "main", "run"]


@click.command(
    cls=LazyGroup,
    name=PROGRAM,
    context_settings={"help_option_names": ["-h", "--help"], "max_content_width": 100},
    epilog=f"'{PROGRAM} COMMAND --help' shows an example to run.",
)
@click.version_option(package_name=PROGRAM, prog_name=PROGRAM, message="%(prog)s %(version)s")
def cli() -> None:
    """From photodiode bytes to metres per volt, for a laser interferometer on a bench."""


def run(arguments: Sequence[str] | None = None) -> int:
    """Run the program and return its exit code.

    Parameters
    ----------
    arguments : sequence of str, optional
        Without the program's name; default: the process's own.

    Returns
    -------
    int
        The exit code.
    """
    arguments = list(sys.argv[1:] if arguments is None else arguments)
    if "_MIDFRINGE_COMPLETE" in os.environ:
        from click.shell_completion import shell_complete

        instruction = os.environ["_MIDFRINGE_COMPLETE"]
        return shell_complete(cli, {}, PROGRAM, "_MIDFRINGE_COMPLETE", instruction)
    for stream in (sys.stdout, sys.stderr):
        if hasattr(stream, "reconfigure"):
            stream.reconfigure(errors="replace")  # a terminal without µ shows ? and goes on
    set_up_logging()
    load_lean()
    try:
        code = _invoke(arguments or ["--help"])
        sys.stdout.flush()
    except BaseException as error:  # noqa: BLE001  # every end of the program gets its code here
        return _end(error)
    return code


def _invoke(arguments: list[str]) -> int:
    try:
        with cli.make_context(PROGRAM, arguments) as context:
            cli.invoke(context)
    except click.exceptions.Exit as end:
        return end.exit_code
    return 0


def _end(error: BaseException) -> int:
    """Say in one line why the program ends, and return its exit code."""
    if os.environ.get("MIDFRINGE_DEBUG") == "1" and not isinstance(error, SystemExit):
        import traceback

        traceback.print_exception(error)
    if isinstance(error, OSError) and error.errno == errno.EPIPE:
        _silence_stdout()  # whoever read our output has seen enough
        return 0
    if isinstance(error, SystemExit):
        return error.code if isinstance(error.code, int) else int(error.code is not None)
    if isinstance(error, (KeyboardInterrupt, click.Abort, EOFError)):
        _say("interrupted")
        return 130
    message, code = _explain(error)
    _say(message)
    return code


def _explain(error: BaseException) -> tuple[str, int]:
    if isinstance(error, MidfringeError):
        return str(error), error.exit_code
    if isinstance(error, click.ClickException):
        return _usage(error), 2
    if isinstance(error, OSError):
        _silence_stdout()  # what it still holds would fail again at exit
        named = f": {error.filename}" if error.filename else ""
        return f"{(error.strerror or str(error)).lower()}{named}", 3
    if isinstance(error, MemoryError):
        return "not enough memory", 3
    kind = type(error).__name__
    return f"unexpected {kind}: {error} (MIDFRINGE_DEBUG=1 shows where)", 3


def _usage(error: click.ClickException) -> str:
    if isinstance(error, click.NoSuchOption):
        close = _near_options(error)
        hint = f"; the nearest is {close[0]!r}" if close else ""
        message = f"unknown option {error.option_name!r}{hint}"
    else:
        message = error.format_message().rstrip(".")
    context = getattr(error, "ctx", None)
    path = context.command_path if context is not None else PROGRAM
    return f"{message} (see '{path} --help')"


def _near_options(error: click.NoSuchOption) -> list[str]:
    if error.ctx is None:
        return []
    known = [o for p in error.ctx.command.get_params(error.ctx) for o in p.opts if o[:2] == "--"]
    return get_close_matches(error.option_name, known, 1, 0.5)


def _say(message: str) -> None:
    try:
        click.echo(f"{PROGRAM}: {' '.join(message.split())}", err=True)
    except OSError:
        return  # nobody listens on stderr; the exit code still tells


def _silence_stdout() -> None:
    try:
        descriptor = os.open(os.devnull, os.O_WRONLY)
        os.dup2(descriptor, sys.stdout.fileno())
        os.close(descriptor)
    except (OSError, ValueError):
        return  # stdout is no file, as under a test runner


def main(arguments: Sequence[str] | None = None) -> NoReturn:
    """Run the program and end the process with its exit code.

    Parameters
    ----------
    arguments : sequence of str, optional
        Without the program's name; default: the process's own.
    """
    sys.exit(run(arguments))
