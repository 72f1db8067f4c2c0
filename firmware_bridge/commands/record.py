"""``midfringe record``: serial port to recording."""

import logging
import signal
import sys
from typing import Any

import click

from firmware_bridge.drive_options import DriveLineType, LockInType
from metro.options import ValueType, command, distrust, is_quiet, output_options

__all__ = ["record"]


def _list_ports(as_json: bool) -> None:  # as the option
    from firmware_bridge.port import list_ports
    from metro.output import table, to_json

    found = list_ports()
    if as_json:
        ports = [{"name": info.name, "description": info.description} for info in found]
        click.echo(to_json({"ports": ports}))
    elif found:
        click.echo(table([[info.name, info.description] for info in found], ["port", "what"]))
    else:
        click.echo("no serial port found on this computer", err=True)


def _needed(value: str | None, option: str) -> str:
    if value is None:
        raise click.MissingParameter(param_hint=f"'{option}'", param_type="option")
    return value


def _recording_name(out: str) -> str:
    """Return the name of the recording to be, refused where it would not look like one."""
    from metro.errors import MetroError

    if not out.lower().endswith(".mfr"):
        raise MetroError(f"--out must end in .mfr, got {out!r}")
    return out


def _drive(lines: tuple[Any, ...], bench_file: str | None, limit_v: float | None) -> Any:  # noqa: ANN401
    """Return the drive that is asked for, or None; its cautions are said whatever is asked."""
    from firmware_bridge.drive_options import drive_cautions, drive_within
    from metro.bench import load_bench
    from metro.errors import MetroError

    if not lines:
        if limit_v is not None:
            raise MetroError("--drive-limit goes with --line")
        return None
    bench = None if bench_file is None else load_bench(bench_file)
    drive = drive_within(lines, limit_v, bench)
    for caution in drive_cautions(drive, bench):
        click.echo(f"caution: {caution}", err=True)
    return drive


@command(example="midfringe record --port /dev/ttyACM0 --out run.mfr --duration 60s")
@click.option("--port", metavar="P", help="Port or pyserial URL; needed.")
@click.option("--out", metavar="FILE", help="The recording to make, NAME.mfr; needed.")
@click.option(
    "--duration",
    type=ValueType("s", above=0.0),
    metavar="T",
    help="By the board's own counting; without it until Ctrl-C.",
)
@click.option("--size", metavar="S", help="End before the file is larger, such as 500MB or 2GiB.")
@click.option("--baud", type=click.IntRange(min=1), default=115200, metavar="N", help="115200.")
@click.option("--reconnect", is_flag=True, help="Wait for a port that is gone and go on.")
@click.option("--text", is_flag=True, help="The board prints lines of numbers.")
@click.option(
    "--rate", type=ValueType("Hz", above=0.0), metavar="F", help="With --text: lines per second."
)
@click.option(
    "--line",
    "lines",
    type=DriveLineType(),
    multiple=True,
    metavar="F=A",
    help="Drive line of the board, such as 87.1Hz=0.2V; repeatable.",
)
@click.option(
    "--lock-in",
    type=LockInType(),
    metavar="C=T",
    help="The board's lock-in of a channel instead of samples: photodiode=1s.",
)
@click.option(
    "--bench",
    "bench_file",
    envvar="MIDFRINGE_BENCH",
    metavar="FILE",
    help="With --line: the bench file, for its drive_limit.",
)
@click.option(
    "--drive-limit",
    type=ValueType("V", above=0.0),
    metavar="V",
    help="With --line: what all lines together may reach.",
)
@click.option("--list", "only_list", is_flag=True, help="Show the ports and end.")
@output_options("json", "overwrite")
def record(
    port: str | None,
    out: str | None,
    duration: float | None,
    size: str | None,
    baud: int,
    reconnect: bool,
    text: bool,
    rate: float | None,
    lines: tuple[Any, ...],
    lock_in: Any,  # noqa: ANN401  # a LockInStart; modules load when called
    bench_file: str | None,
    drive_limit: float | None,
    only_list: bool,
    as_json: bool,
    overwrite: bool,
) -> None:
    """Record a serial port without losing a sample unnoticed.

    Ends after --duration, before --size is exceeded, or with Ctrl-C. A recording that changes its channels or rate goes on in
    NAME-2.mfr. The exit code is 1 where samples were lost or bytes discarded midway.

    Lines are set before the first sample that is kept, in volts at the actuator's terminals where a bench says what lies between,
    and brought to rest at the end; after a reset of the board they are set again. A limit in software is no interlock.
    """
    from firmware_bridge.byte_size import parse_byte_size
    from firmware_bridge.errors import DeviceFailedError
    from firmware_bridge.live_line import LiveLine
    from firmware_bridge.recorder import record as record_port
    from metro.errors import MetroError
    from metro.output import check_writable, to_json

    if only_list:
        _list_ports(as_json)
        return
    port, out = _needed(port, "--port"), _needed(out, "--out")
    if rate is not None and not text:
        raise MetroError("--rate goes with --text; a board that sends frames announces its rate")
    check_writable(_recording_name(out), overwrite)
    drive = _drive(lines, bench_file, drive_limit)
    # A service manager's polite end is treated like Ctrl-C.
    for name in ("SIGTERM", "SIGHUP"):  # and a terminal that is closed
        if hasattr(signal, name):
            signal.signal(getattr(signal, name), signal.default_int_handler)
    show = not is_quiet() and sys.stderr.isatty()
    line = LiveLine(lambda part: click.echo(part, err=True, nl=False))
    log = logging.getLogger("firmware_bridge.port_watch")
    log.addFilter(line.step_aside)
    try:
        summary = record_port(
            port,
            out,
            duration_s=duration,
            size_bytes=None if size is None else parse_byte_size(size, "--size"),
            baud=baud,
            text=text,
            rate_hz=rate,
            reconnect=reconnect,
            overwrite=overwrite,
            drive=drive,
            lock_in=lock_in,
            progress=line.show if show else None,
        )
    except DeviceFailedError as error:
        if as_json and error.kept is not None:
            click.echo(to_json(_document(error.kept) | {"failure": str(error)}))
        raise
    finally:
        log.removeFilter(line.step_aside)
        line.end()
    click.echo(to_json(_document(summary)) if as_json else _for_people(summary))
    if not is_quiet():
        for remark in summary.remarks:
            click.echo(remark, err=True)
    if summary.reasons:
        distrust(summary.reasons)


def _gaps(summary: Any) -> list[dict[str, Any]]:  # noqa: ANN401
    return [
        {"index": gap.index, "length": gap.length, "exact": gap.exact, "length_u": gap.length_u}
        for gap in summary.gaps
    ]


def _document(summary: Any) -> dict[str, Any]:  # noqa: ANN401
    return {
        "file": None if summary.file is None else str(summary.file),
        "files": [str(path) for path in summary.files],
        "samples": summary.samples,
        "gaps": _gaps(summary),
        "over_range": summary.over_range,
        "lock_in_results": summary.lock_ins,
        "bytes_discarded": summary.bytes_discarded,
        "duration": {"value": summary.duration_s, "unit": "s", "u": None},
        "rate": {"value": summary.rate_hz, "unit": "Hz", "u": summary.rate_u_hz},
        "remarks": summary.remarks,
        "reasons": summary.reasons,
        "failure": None,
    }


def _for_people(summary: Any) -> str:  # noqa: ANN401
    from metro.output import table

    if summary.file is None:
        return "nothing came; nothing was written"
    missing = sum(gap.length for gap in summary.gaps)
    u = "" if summary.rate_u_hz is None else f", u = {summary.rate_u_hz:.2g} Hz"
    lock_in = [["lock-in", f"{summary.lock_ins} results"]] if summary.lock_ins else []
    return table(
        [
            ["file", ", ".join(str(path) for path in summary.files)],
            ["samples", str(summary.samples)],
            ["duration", f"{summary.duration_s:.6g} s at {summary.rate_hz:.9g} Hz{u}"],
            *lock_in,
            ["gaps", f"{len(summary.gaps)} ({missing} samples missing)"],
            ["over range", f"{summary.over_range} values"],
            ["discarded", f"{summary.bytes_discarded} bytes"],
        ]
    )
