"""Drive lines on the command line: ``--line 87.1Hz=0.2V``, within a limit that someone has stated."""

from collections.abc import Callable, Sequence
from typing import TYPE_CHECKING, Any

import click

from firmware_bridge.drive_lines import DriveError, DriveLine, DriveLines
from firmware_bridge.lock_in_start import LockInStart
from metro.errors import MetroError
from metro.units import si

if TYPE_CHECKING:
    from metro.bench import Bench

    _ParamType = click.ParamType[Any]
else:
    _ParamType = click.ParamType  # not generic before click 8.2

__all__ = ["DriveLineType", "LockInType", "drive_cautions", "drive_within"]

_EXAMPLE = "such as 87.1Hz=0.2V, or 87.1Hz=0.2V@0.5rad with a phase"


class _Assigned(_ParamType):
    """An option value NAME=VALUE of one kind; ``parse`` takes a text and the option's name."""

    def __init__(self, usual: str, kind: type[Any], parse: Callable[[str, str], Any]) -> None:
        self._usual, self._kind, self._parse = usual, kind, parse

    def convert(
        self,
        value: Any,  # noqa: ANN401  # text from the command line
        param: click.Parameter | None,
        ctx: click.Context | None,  # noqa: ARG002  # click's signature
    ) -> Any:  # noqa: ANN401  # of the kind
        """Return what the text says.

        Parameters
        ----------
        value : str
            As given.
        param : click.Parameter, optional
            The option.
        ctx : click.Context, optional
            Not used.

        Returns
        -------
        object
            In SI.

        Raises
        ------
        MetroError
            If it is none.
        """
        if isinstance(value, self._kind):
            return value
        return self._parse(str(value), self._usual if param is None else param.opts[0])


def _drive_line(text: str, name: str) -> DriveLine:
    frequency, equals, rest = text.partition("=")
    amplitude, _, phase = rest.partition("@")
    if not equals:
        raise MetroError(f"{name} must be FREQUENCY=AMPLITUDE, {_EXAMPLE}, got {text!r}")
    return DriveLine(
        si(frequency, name, "Hz"), si(amplitude, name, "V"), si(phase or "0 rad", name, "rad")
    )


def _lock_in(text: str, name: str) -> LockInStart:
    channel, equals, time = text.rpartition("=")
    if not equals or not channel:
        raise MetroError(f"{name} must be CHANNEL=TIME, such as photodiode=1s, got {text!r}")
    return LockInStart(channel, si(time, name, "s", above=0.0))


class DriveLineType(_Assigned):
    """An option value FREQUENCY=AMPLITUDE or FREQUENCY=AMPLITUDE@PHASE, zero to peak."""

    name = "LINE"

    def __init__(self) -> None:
        super().__init__("--line", DriveLine, _drive_line)


class LockInType(_Assigned):
    """An option value CHANNEL=TIME, the channel by name or by number from 1."""

    name = "LOCK-IN"

    def __init__(self) -> None:
        super().__init__("--lock-in", LockInStart, _lock_in)


def drive_within(
    lines: Sequence[DriveLine], limit_v: float | None, bench: "Bench | None"
) -> DriveLines:
    """Return the lines, refused where they go beyond a limit or none is known.

    Parameters
    ----------
    lines : sequence of DriveLine
        Wanted, with a bench in volts at the actuator's terminals, else in those of the board's
        drive channel.
    limit_v : float or None
        As given on the command line [V].
    bench : Bench or None
        Its ``[actuator] drive_limit``, and its ``[drive]`` for what stands between the board's drive
        channel and the terminals.

    Returns
    -------
    DriveLines
        Within the lower of both limits.

    Raises
    ------
    DriveError
        If they do not fit it, or there is no limit.
    """
    from metro.drive import terminal_factor

    limits_v = [] if limit_v is None else [limit_v]
    factor = 1.0
    if bench is not None:
        factor = terminal_factor(bench, recorded=True)
        if bench.get("actuator.drive_limit") is not None:
            limits_v.append(bench.magnitude("actuator.drive_limit"))
    if not limits_v:
        raise DriveError(
            "--line needs a limit: --bench with [actuator] drive_limit, or --drive-limit"
        )
    drive = DriveLines(min(limits_v), factor)
    for slot, line in enumerate(lines):
        drive.set(slot, line)
    return drive


def drive_cautions(drive: DriveLines, bench: "Bench | None") -> list[str]:
    """Return the cautions that go with a drive.

    Parameters
    ----------
    drive : DriveLines
        What will be set.
    bench : Bench or None
        The bench, where there is one.

    Returns
    -------
    list of str
        One line each.
    """
    from metro.bench import Bench
    from metro.plan_cautions import safety_cautions

    _, voltage, limit = safety_cautions(bench or Bench(), drive.peak_v, drive.limit_v)
    if bench is None:
        voltage = voltage.replace("at the actuator", "at the board, before any amplifier")
    return [voltage, limit]
