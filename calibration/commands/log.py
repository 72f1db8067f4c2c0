"""``midfringe log``: unattended recording for weeks, with line results and alarms."""

import contextlib
import logging
import signal
import threading
from collections.abc import Iterator
from typing import TYPE_CHECKING, Any

import click

from calibration.desk.judging_options import Judging, judging_options
from calibration.desk.ledger_options import ledger_options
from metro.options import ValueType, command, distrust, is_quiet, output_options

if TYPE_CHECKING:
    from calibration.desk.ledger import Ledger
    from calibration.desk.line_log import LogPlan
    from calibration.desk.log_room import LeastRoom
    from calibration.desk.unattended import LogSettings

__all__ = ["log"]

_WRONG_INPUT = 2
_LONGEST_S = 3600.0
_SHARE = 8  # of what is kept: the largest recording, unless told


@command(
    example="midfringe log /dev/ttyACM0 --out data/bench --ledger bench.ledger --slope rising "
    "--keep-bytes 20GB --reconnect"
)
@click.argument("port")
@click.option("--out", required=True, metavar="FOLDER/NAME", help="Recordings NAME-time.mfr.")
@click.option(
    "--line",
    "lines_hz",
    multiple=True,
    type=ValueType("Hz", above=0.0),
    metavar="F",
    help="A line, such as 87.1Hz; repeatable. Default: those of the calibration in force.",
)
@click.option(
    "--slope",
    type=click.Choice(["rising", "falling"]),
    help="Measure lines in metres, by the fringe of the calibration in force, on this side.",
)
@click.option(
    "--every",
    type=ValueType("s", above=0.0),
    default=60.0,
    metavar="T",
    help="From one line result to the next: 60s.",
)
@click.option(
    "--over",
    type=ValueType("s", above=0.0),
    metavar="T",
    help="Stretch of each fit; all of --every.",
)
@click.option("--channel", metavar="NAME", help="The photodiode's channel, or its number.")
@click.option("--drive", metavar="NAME", help="The drive's channel.")
@click.option("--temperature-channel", metavar="NAME", help="A channel in K or degC.")
@click.option("--mains", type=ValueType("Hz", above=0.0), default=50.0, metavar="F", help="50Hz.")
@click.option(
    "--rotate-every",
    type=ValueType("s", above=0.0),
    metavar="T",
    help="Longest recording: 1 h.",
)
@click.option("--rotate-bytes", metavar="S", help="Largest recording, such as 500MB.")
@click.option("--keep-bytes", metavar="S", help="Of all recordings, at least two: 20GB.")
@click.option(
    "--keep-for", type=ValueType("s", above=0.0), metavar="T", help="Of recordings, such as 30day."
)
@click.option("--until-alarm", is_flag=True, help="End with the first alarm.")
@click.option(
    "--duration", type=ValueType("s", above=0.0), metavar="T", help="End after this; else never."
)
@click.option("--baud", type=click.IntRange(min=1), default=115200, metavar="N", help="115200.")
@click.option("--reconnect", is_flag=True, help="Wait for a port that is gone, and a full disk.")
@click.option("--text", is_flag=True, help="The board prints lines of numbers.")
@click.option(
    "--rate", type=ValueType("Hz", above=0.0), metavar="F", help="With --text: lines per second."
)
@judging_options
@ledger_options
@output_options("json")
def log(
    port: str,
    out: str,
    judging: Judging,
    ledger: str,
    bench_name: str | None,
    until_alarm: bool,
    as_json: bool,
    keep_bytes: str | None,
    keep_for: float | None,
    rotate_bytes: str | None,
    **options: Any,  # noqa: ANN401  # each is used where it belongs
) -> None:
    """Log PORT unattended: rotating recordings, line results to the ledger, alarms.

    Goes on until Ctrl-C or SIGTERM. Of the recordings NAME-YYYYmmddTHHMMSSZ.mfr the oldest are
    deleted in time, as --keep-bytes and --keep-for say; the running one never. --keep-bytes that
    would not hold two recordings at the board's rate are refused. The exit code is 1 where there
    was an alarm.
    """
    from calibration.desk.ledger import Ledger
    from calibration.desk.line_log import LineLog
    from calibration.desk.log_folder import LogFolder, Retention
    from calibration.desk.unattended import UnattendedLog
    from metro.output import to_json

    keep, largest = _sizes(keep_bytes, rotate_bytes)
    folder = LogFolder(out, Retention(keep, keep_for))
    room = None if keep is None else _room(keep, rotate_bytes is not None, options)
    settings = _settings(port, largest, room, options)
    stop = threading.Event()
    with folder.held(), Ledger(ledger) as kept, _nothing_left(kept):
        plan = _plan(kept, bench_name or "bench", judging, port, options)
        with _asked_to_end(stop), _heard():
            lines = LineLog(kept, plan, (lambda _alarm: stop.set()) if until_alarm else None)
            try:
                summary = UnattendedLog(settings, folder, lines).run(stop)
            finally:
                lines.close()
    document = summary.to_dict() | {"results": lines.results, "alarms": lines.alarms}
    if as_json:
        click.echo(to_json(document))
    else:
        click.echo(
            f"{len(summary.files)} recordings here, {summary.deleted} deleted in time, "
            f"{lines.results} line results, {len(lines.alarms)} alarms"
        )
    if lines.reasons:
        distrust(lines.reasons)


def _sizes(keep_bytes: str | None, rotate_bytes: str | None) -> tuple[int | None, int | None]:
    """Return what is kept and the largest recording [bytes]."""
    from calibration.desk.ledger_errors import LedgerError
    from firmware_bridge.byte_size import parse_byte_size

    keep = None if keep_bytes is None else parse_byte_size(keep_bytes, "--keep-bytes")
    largest = None if rotate_bytes is None else parse_byte_size(rotate_bytes, "--rotate-bytes")
    if keep is None:
        return None, largest
    if largest is None:
        return keep, keep // _SHARE
    if largest > keep // 2:
        raise LedgerError(
            f"--rotate-bytes must be at most half of --keep-bytes, {keep // 2} bytes, got {largest}"
        )
    return keep, largest


def _room(keep: int, is_size_given: bool, options: dict[str, Any]) -> "LeastRoom":
    """Return what must be kept: two recordings as long as is asked for, else as a line result.

    Two of a size that is given fit in any case, but for very small ones.
    """
    from calibration.desk.log_room import LeastRoom

    if is_size_given:
        return LeastRoom(keep)
    if options["rotate_every"] is not None:
        return LeastRoom(keep, options["rotate_every"], "--rotate-every")
    return LeastRoom(keep, options["every"], "--every")


def _settings(
    port: str, largest: int | None, room: "LeastRoom | None", options: dict[str, Any]
) -> "LogSettings":
    from calibration.desk.ledger_errors import LedgerError
    from calibration.desk.logged_channels import ChannelChoice
    from calibration.desk.unattended import LogSettings

    over = options["over"] or options["every"]
    if over > options["every"]:
        raise LedgerError(f"--over must be at most --every, {options['every']:g} s, got {over:g} s")
    if options["rate"] is not None and not options["text"]:
        raise LedgerError("--rate goes with --text; a board that sends frames announces its rate")
    if options["text"] and options["rate"] is None:
        raise LedgerError("--text needs --rate, the lines per second: frequencies rest on it")
    return LogSettings(
        port,
        options["baud"],
        options["text"],
        options["rate"],
        options["reconnect"],
        options["duration"],
        largest,
        options["rotate_every"] or _LONGEST_S,
        options["every"],
        over,
        ChannelChoice(options["channel"], options["drive"], options["temperature_channel"]),
        room,
    )


def _plan(
    kept: "Ledger", bench: str, judging: Judging, port: str, options: dict[str, Any]
) -> "LogPlan":
    from calibration.desk.ledger_errors import LedgerError
    from calibration.desk.line_log import LogPlan
    from calibration.desk.measured_lines import Measuring

    in_force = kept.in_force(bench)
    if in_force is None and options["slope"] is not None:
        raise LedgerError(
            f"--slope needs a calibration in force, the ledger {kept.name} has none of {bench!r}"
        )
    lines_hz = tuple(options["lines_hz"])
    if not lines_hz:
        if in_force is None:
            raise LedgerError("--line is needed: no calibration is in force that names lines")
        lines_hz = tuple(float(a.frequency.magnitude) for a in in_force.calibration.actuator)
    is_metres = options["slope"] is not None
    calibration = in_force.calibration if in_force is not None and is_metres else None
    measuring = Measuring(lines_hz, calibration, options["slope"] or "rising", options["mains"])
    return LogPlan(measuring, is_metres, bench, judging.law, judging.rule, port)


@contextlib.contextmanager
def _nothing_left(kept: "Ledger") -> Iterator[None]:
    """Leave no new ledger behind where the input is wrong."""
    from metro.errors import MidfringeError

    try:
        yield
    except MidfringeError as error:
        if error.exit_code == _WRONG_INPUT:
            kept.discard_if_new()
        raise


@contextlib.contextmanager
def _asked_to_end(stop: threading.Event) -> Iterator[None]:
    """End cleanly on Ctrl-C, on a service manager's polite end, and when the terminal is closed."""
    signals = [getattr(signal, n) for n in ("SIGINT", "SIGTERM", "SIGHUP") if hasattr(signal, n)]
    before = [signal.signal(number, lambda *_: stop.set()) for number in signals]
    try:
        yield
    finally:
        for number, handler in zip(signals, before, strict=True):
            signal.signal(number, handler)


@contextlib.contextmanager
def _heard() -> Iterator[None]:
    """Let the log say what it does, one line each, unless asked to be quiet."""
    desk = logging.getLogger("calibration.desk")
    before = desk.level
    if not is_quiet():
        desk.setLevel(logging.INFO)
    try:
        yield
    finally:
        desk.setLevel(before)
