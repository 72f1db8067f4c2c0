"""Options that commands share to read a recording: columns, rate, and the stretch of time.

Use it on any command that takes a recording::

    @command(example="midfringe lines scope.csv --channel 3 --drive 2 --line 1kHz")
    @click.argument("file")
    @recording_options
    def lines(file: str, reading: Reading, ...) -> None:
        recording = reading.open(file)
        signal = reading.signal(recording)  # Trace of --channel, from --from to --to
        drive = reading.drive(recording)  # Trace of --drive, or None
        ...
        reading.tell(recording)  # its remarks on stderr, once nothing can be refused any more
"""

import functools
from collections.abc import Callable
from typing import Any, TypeVar, overload

import click

from firmware_bridge.opened_recordings import distrust_opened, judge_opened, opened_reasons
from firmware_bridge.reading_choice import Reading
from metro.options import ValueType

__all__ = ["Reading", "opened_reasons", "recording_options"]

F = TypeVar("F", bound=Callable[..., Any])

_OPTIONS: dict[str, tuple[tuple[str, ...], dict[str, Any]]] = {
    "time": (
        ("--time", "time"),
        {
            "metavar": "COLUMN",
            "help": "The time column, by header or number from 1; 3+4 for seconds and microseconds.",
        },
    ),
    "channel": (
        ("--channel", "channel"),
        {
            "metavar": "COLUMN",
            "help": "The column to read, the photodiode's; name:3 is the header '3'.",
        },
    ),
    "drive": (
        ("--drive", "drive_channel"),
        {"metavar": "COLUMN", "help": "The column of the drive monitor."},
    ),
    "rate": (
        ("--rate", "rate_hz"),
        {
            "metavar": "VALUE",
            "type": ValueType("Hz", above=0.0),
            "help": "Samples per second, where there is no time column. Such as 4kHz.",
        },
    ),
    "from": (
        ("--from", "from_s"),
        {
            "metavar": "VALUE",
            "type": ValueType("s"),
            "help": "Begin here, counted from the first sample.",
        },
    ),
    "to": (
        ("--to", "to_s"),
        {
            "metavar": "VALUE",
            "type": ValueType("s"),
            "help": "End here, counted from the first sample.",
        },
    ),
    "own-time": (
        ("--own-time", "own_time"),
        {"is_flag": True, "help": "--from and --to are the file's own time stamps."},
    ),
}


@overload
def recording_options(function: F) -> F: ...
@overload
def recording_options(*, omit: tuple[str, ...], is_judged: bool = True) -> Callable[[F], F]: ...
def recording_options(
    function: Callable[..., Any] | None = None,
    *,
    omit: tuple[str, ...] = (),
    is_judged: bool = True,
) -> Callable[..., Any]:
    """Add ``--time --channel --drive --rate --from --to --own-time``; pass them as ``reading``.

    Parameters
    ----------
    function : callable
        Takes ``reading``, a `Reading`.
    omit : tuple of str
        Options that the command does not have, such as ``("drive",)``.
    is_judged : bool
        Whether the command ends with 1, its result written, where a recording that it opened has
        reasons against it; False where nothing is concluded from the samples.

    Returns
    -------
    callable
        Takes the options instead. Also used as ``@recording_options(omit=("drive",))``.
    """
    if function is None:
        return functools.partial(_with_options, omit=omit, is_judged=is_judged)
    return _with_options(function, omit, is_judged=is_judged)


def _with_options(function: F, omit: tuple[str, ...], *, is_judged: bool) -> F:
    chosen = {key: value for key, value in _OPTIONS.items() if key not in omit}

    @functools.wraps(function)
    def with_reading(*args: Any, **kwargs: Any) -> Any:  # noqa: ANN401  # any command
        given = {names[1]: kwargs.pop(names[1]) for names, _ in chosen.values()}
        judge_opened(is_wanted=is_judged)
        try:
            result = function(*args, reading=Reading(**given), **kwargs)
        except click.exceptions.Exit as end:
            if is_judged and end.exit_code == 1:
                distrust_opened()
            raise
        if is_judged:
            distrust_opened()
        return result

    for names, settings in reversed(chosen.values()):
        with_reading = click.option(*names, **settings)(with_reading)
    return with_reading  # type: ignore[return-value]  # the options stand for ``reading``
