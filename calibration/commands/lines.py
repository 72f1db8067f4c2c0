"""``midfringe lines``: amplitude and phase of each line, ratio to the drive."""

from dataclasses import replace
from typing import TYPE_CHECKING

import click

from firmware_bridge.reading import Reading, recording_options
from metro.options import ValueType, bench_options, command, distrust, is_quiet, output_options

if TYPE_CHECKING:
    from calibration.line_fit import LineFit
    from firmware_bridge.trace import Recording
    from metro.bench import Bench

__all__ = ["lines"]


@command(example="midfringe lines scope.csv --channel 3 --drive 2 --line 1kHz")
@click.argument("file")
@click.option(
    "--line",
    "lines_hz",
    multiple=True,
    type=ValueType("Hz", above=0.0),
    metavar="F",
    help="A line, such as 87.1Hz; repeatable. Default: the lines of the bench.",
)
@click.option("--free", is_flag=True, help="Fit the frequency of each line too.")
@click.option(
    "--mains",
    "mains_hz",
    type=ValueType("Hz", above=0.0),
    metavar="F",
    help="Mains frequency, such as 60Hz. Default: the bench's, else 50Hz.",
)
@recording_options
@bench_options
@output_options("out", "json", "overwrite")
def lines(
    file: str,
    lines_hz: tuple[float, ...],
    free: bool,
    mains_hz: float | None,
    reading: Reading,
    bench: "Bench",
    out: str | None,
    as_json: bool,
    overwrite: bool,
) -> None:
    """Fit the lines in the recording FILE: amplitude and phase, noise beside each, ratio to the drive.

    Phases are those at the recording's first sample, whatever --from says. Without --drive a channel
    named "drive" is the drive.
    """
    from calibration.line_reading import read_recording_lines
    from metro.output import check_document, to_json, write_whole

    if out is not None:
        check_document(out, overwrite, [file, bench.path])
    recording = reading.open(file)
    reading = _with_drive(reading, recording, bench)
    drive = [] if reading.drive_channel is None else [reading.drive_channel]
    fit = read_recording_lines(
        recording,
        [reading.channel_name(recording), *drive],
        list(lines_hz) or [line.frequency_hz for line in bench.lines],
        from_s=reading.from_s,
        to_s=reading.to_s,
        free=free,
        mains_hz=mains_hz or _mains(bench),
    )
    document = to_json(fit.to_dict())
    if out is not None:
        write_whole(out, document + "\n", overwrite=overwrite)
    click.echo(document if as_json else _for_people(fit, free=free))
    reading.tell(recording)
    if not is_quiet():
        for remark in fit.remarks:
            click.echo(remark, err=True)
    if not fit.is_trustworthy:
        distrust(fit.reasons_by_line())


def _with_drive(reading: Reading, recording: "Recording", bench: "Bench") -> Reading:
    """Name the drive channel: as given, as the bench says, or the one called "drive"."""
    if reading.drive_channel is not None:
        return reading
    wanted = bench.text("drive.channel")
    if wanted is None:
        named = [c.name for c in recording.channels if c.name.strip().lower() == "drive"]
        wanted = named[0] if len(named) == 1 else None
    if wanted is None or recording.find(wanted) == recording.find(reading.channel_name(recording)):
        return reading
    return replace(reading, drive_channel=wanted)


def _mains(bench: "Bench") -> float:
    entry = bench.get("mains.frequency")
    return 50.0 if entry is None else float(entry.magnitude)


def _for_people(fit: "LineFit", *, free: bool) -> str:
    from metro.display import show
    from metro.output import table

    rows: list[list[object]] = []
    for line in fit.lines:
        rows += [
            ["line", str(line.frequency) if free else show(line.frequency_hz, "Hz", 9)],
            ["  amplitude, zero to peak", str(line.amplitude)],
            ["  phase at t = 0", "refused" if line.is_phase_refused else str(line.phase)],
            ["  noise beside it", show(line.density_value, line.noise_density.unit, 3)],
            ["  signal to noise A/√(S/T)", f"{line.snr_value:.4g}"],
        ]
        if line.drive is not None and line.ratio is not None:
            rows += [
                ["  drive, zero to peak", str(line.drive.amplitude)],
                [
                    "  drive phase at t = 0",
                    "refused" if line.is_phase_refused else str(line.drive.phase),
                ],
                ["  response/drive", str(line.ratio.magnitude)],
                ["  phase of response/drive", str(line.ratio.phase)],
            ]
        trust = "; ".join(line.distrust_reasons) or "no reason for distrust found"
        rows.append(["  trust", trust])
    clock = fit.clock_offset
    if clock is not None:
        followed = "followed" if fit.clock_applied else "not told from zero, not followed"
        rows.append(["clock offset of the lines", f"{clock}; {followed}"])
    rows += [
        ["used", f"{100 * fit.used_fraction:.4g} % of {show(fit.duration_s, 's')}"],
        ["convention", "A·cos(2πft + φ), t = 0 at the first sample of the recording"],
    ]
    return table(rows)
