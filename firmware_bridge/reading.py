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
from dataclasses import dataclass, replace
from typing import TYPE_CHECKING, Any, TypeVar, overload

import click

from firmware_bridge.channel import ChannelError, listed
from metro.options import ValueType, distrust, is_quiet

if TYPE_CHECKING:
    from firmware_bridge.trace import Recording, Trace

__all__ = ["Reading", "opened_reasons", "recording_options"]

F = TypeVar("F", bound=Callable[..., Any])

_USUAL = ("photodiode", "pd", "signal")  # what --channel means where it is not given

_OPENED = "firmware_bridge.opened"
_JUDGED = "firmware_bridge.judged"

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


@dataclass(frozen=True, slots=True)
class Reading:
    """How a recording is to be read: the values of the options.

    Parameters
    ----------
    time, channel, drive_channel : str, optional
        Columns, by header or number.
    rate_hz : float, optional
        Samples per second [Hz].
    from_s, to_s : float, optional
        The stretch [s].
    own_time : bool
        Whether the stretch is in the file's own stamps.
    """

    time: str | None = None
    channel: str | None = None
    drive_channel: str | None = None
    rate_hz: float | None = None
    from_s: float | None = None
    to_s: float | None = None
    own_time: bool = False

    def open(self, path: str) -> "Recording":
        """Open a recording as the options say.

        Parameters
        ----------
        path : str
            The file, "-" for standard input.

        Returns
        -------
        Recording
            Opened.

        Raises
        ------
        BridgeError
            As :func:`firmware_bridge.open_recording`.
        """
        from firmware_bridge.opening import open_recording
        from metro.units import quantity

        rate = None if self.rate_hz is None else quantity(self.rate_hz, "Hz")
        recording = open_recording(path, time=self.time, rate=rate, own_time=self.own_time)
        context = click.get_current_context(silent=True)
        if context is not None:
            context.meta.setdefault(_OPENED, []).append((self, recording))
        return recording

    def reasons(self, recording: "Recording") -> list[str]:
        """Return why the stretch asked for must not be trusted, whatever is made of it.

        Parameters
        ----------
        recording : Recording
            Opened.

        Returns
        -------
        list of str
            Such as that a large part of the file could not be read. That a recording was cut
            says nothing against a stretch that ends before.
        """
        from firmware_bridge.recording import NO_END

        if self.to_s is None or recording.span(self.from_s, self.to_s)[1] == recording.length:
            return recording.reasons
        return [reason for reason in recording.reasons if reason != NO_END]

    def channel_name(self, recording: "Recording") -> str:
        """Return the channel that is meant: the one given, the only one, or the photodiode.

        Parameters
        ----------
        recording : Recording
            Opened.

        Returns
        -------
        str
            A name for `Recording.find`.

        Raises
        ------
        ChannelError
            If none was given and it is not clear.
        """
        if self.channel is not None:
            return self.channel
        names = [channel.name for channel in recording.channels]
        if len(names) == 1:
            return str(recording.columns[0])
        usual = [k for k, name in enumerate(names) if name.lower() in _USUAL]
        if len(usual) == 1:
            return str(recording.columns[usual[0]])
        has = listed(recording.channels, recording.columns)
        raise ChannelError(f"{recording.path} has several channels; give --channel: {has}")

    def signal(self, recording: "Recording") -> "Trace":
        """Return the photodiode's trace over the stretch asked for.

        Parameters
        ----------
        recording : Recording
            Opened.

        Returns
        -------
        Trace
            NaN where missing or over-range.

        Raises
        ------
        BridgeError
            If there is no such channel or no sample in the stretch.
        """
        return recording.trace(self.channel_name(recording), self.from_s, self.to_s)

    def drive(self, recording: "Recording") -> "Trace | None":
        """Return the drive monitor's trace over the same stretch.

        Parameters
        ----------
        recording : Recording
            Opened.

        Returns
        -------
        Trace or None
            None where no drive was named.

        Raises
        ------
        BridgeError
            If there is no such channel.
        """
        if self.drive_channel is None:
            return None
        return recording.trace(self.drive_channel, self.from_s, self.to_s)

    def with_drive(self, recording: "Recording", wanted: str | None = None) -> "Reading":
        """Return how to read the drive too: as given, as wanted, or the channel called "drive".

        Parameters
        ----------
        recording : Recording
            Opened.
        wanted : str, optional
            The drive's column as the bench names it.

        Returns
        -------
        Reading
            The same where there is no such channel, or where it is the one that is read.

        Raises
        ------
        ChannelError
            If the wanted channel is not there, or it is not clear which one is read.
        """
        if self.drive_channel is not None:
            return self
        if wanted is None:
            named = [
                str(column)
                for column, c in zip(recording.columns, recording.channels, strict=True)
                if c.name.strip().lower() == "drive"
            ]
            wanted = named[0] if len(named) == 1 else None
        if wanted is None or recording.find(wanted) == recording.find(self.channel_name(recording)):
            return self
        return replace(self, drive_channel=wanted)

    def tell(self, recording: "Recording") -> None:
        """Write the remarks of a recording on standard error, unless ``--quiet``.

        Parameters
        ----------
        recording : Recording
            Opened.
        """
        context = click.get_current_context(silent=True)
        is_judged = context is not None and context.meta.get(_JUDGED, False)
        reasons = self.reasons(recording) if is_judged else []
        if not is_quiet():
            for remark in recording.remarks:
                if remark in reasons:
                    continue  # said at the end
                click.echo(f"{recording.path}: {remark}", err=True)


def opened_reasons() -> list[str]:
    """Return why the recordings that the running command opened must not be trusted.

    Returns
    -------
    list of str
        Each once, with its file; empty outside a command.
    """
    context = click.get_current_context(silent=True)
    return [] if context is None else _reasons_of(context.meta)


def _reasons_of(meta: dict[str, Any]) -> list[str]:
    opened = meta.get(_OPENED, [])
    reasons = [f"{item.path}: {text}" for reading, item in opened for text in reading.reasons(item)]
    return list(dict.fromkeys(reasons))


def _distrust_opened(meta: dict[str, Any]) -> None:
    """End with 1 where something speaks against a recording that was opened."""
    reasons = _reasons_of(meta)
    if reasons:
        distrust(reasons)


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
        meta = click.get_current_context().meta
        meta[_JUDGED] = is_judged
        try:
            result = function(*args, reading=Reading(**given), **kwargs)
        except click.exceptions.Exit as end:
            if is_judged and end.exit_code == 1:
                _distrust_opened(meta)
            raise
        if is_judged:
            _distrust_opened(meta)
        return result

    for names, settings in reversed(chosen.values()):
        with_reading = click.option(*names, **settings)(with_reading)
    return with_reading  # type: ignore[return-value]  # the options stand for ``reading``
