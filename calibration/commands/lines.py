"""``midfringe lines``: amplitude and phase of each line, ratio to the drive."""

import math
from typing import TYPE_CHECKING

import click

from firmware_bridge.gap_reason import counted
from firmware_bridge.reading import Reading, recording_options
from metro.options import (
    ValueType,
    bench_options,
    command,
    distrust,
    is_quiet,
    is_verbose,
    output_options,
)

if TYPE_CHECKING:
    from calibration.line_fit import LineFit
    from calibration.line_product import LineProduct
    from firmware_bridge.trace import Recording
    from metro.bench import Bench
    from metro.measured import Measured

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
@click.option(
    "--harmonics",
    type=click.IntRange(2, 20),
    metavar="N",
    help="Fit harmonics of each line too, up to this multiple.",
)
@click.option("--intermodulation", is_flag=True, help="Fit sums and differences of two lines too.")
@click.option("--over-time", is_flag=True, help="Show amplitude and phase in bins of time too.")
@recording_options
@bench_options
@output_options("out", "plot", "json", "overwrite")
def lines(
    file: str,
    lines_hz: tuple[float, ...],
    free: bool,
    mains_hz: float | None,
    harmonics: int | None,
    intermodulation: bool,
    over_time: bool,
    reading: Reading,
    bench: "Bench",
    out: str | None,
    plot: str | None,
    as_json: bool,
    overwrite: bool,
) -> None:
    """Fit the lines in the recording FILE: amplitude and phase, noise beside each, ratio to the drive.

    Phases are those at the recording's first sample, whatever --from says. Without --drive a channel
    named "drive" is the drive.
    """
    from calibration.line_reading import read_recording_lines
    from metro.figure_file import check_figure, save_figure
    from metro.output import check_document, to_json, write_whole

    if plot is not None:
        check_figure(plot, overwrite, [file, bench.path, out])
    if out is not None:
        check_document(out, overwrite, [file, bench.path])
    recording = reading.open(file)
    reading = reading.with_drive(recording, bench.text("drive.channel"))
    drive = [] if reading.drive_channel is None else [reading.drive_channel]
    fit = read_recording_lines(
        recording,
        [reading.channel_name(recording), *drive],
        list(lines_hz) or [line.frequency_hz for line in bench.lines],
        from_s=reading.from_s,
        to_s=reading.to_s,
        free=free,
        mains_hz=mains_hz or _mains(bench),
        harmonics=harmonics or 1,
        intermodulation=intermodulation,
    )
    begun = {
        "file": file,
        "start": _start(recording, reading),
        "recording_reasons": reading.reasons(recording),
    }
    document = to_json(fit.to_dict(over_time=over_time) | begun)
    if out is not None:
        write_whole(out, document + "\n", overwrite=overwrite)
    if plot is not None:
        from calibration.line_plot import lines_figure

        save_figure(lines_figure(fit, file), plot, overwrite=overwrite)
    click.echo(document if as_json else _for_people(fit, free=free, over_time=over_time))
    reading.tell(recording)
    if not is_quiet():
        for remark in (*fit.remarks, *(fit.notes if is_verbose() else ())):
            click.echo(remark, err=True)
    if not fit.is_trustworthy:
        distrust(fit.reasons_by_line())


def _start(recording: "Recording", reading: Reading) -> str | None:
    """Return when the stretch that was fitted began, UTC, where the recording knows."""
    if recording.start_unix_s is None:
        return None
    from datetime import UTC, datetime

    first, _ = recording.span(reading.from_s, reading.to_s)
    moment = datetime.fromtimestamp(recording.start_unix_s + first / recording.rate_hz, UTC)
    return moment.isoformat(timespec="microseconds")


def _mains(bench: "Bench") -> float:
    entry = bench.get("mains.frequency")
    return 50.0 if entry is None else float(entry.magnitude)


def _for_people(fit: "LineFit", *, free: bool, over_time: bool) -> str:
    from metro.display import show
    from metro.output import table

    rows: list[list[object]] = []
    for line in fit.lines:
        rows += [
            ["line", str(line.frequency) if free else show(line.frequency_hz, "Hz", 9)],
            ["  amplitude, zero to peak", str(line.amplitude)],
            ["  phase at t = 0", "refused" if line.is_phase_refused else _angle(line.phase)],
            ["  noise beside it", show(line.density_value, line.noise_density.unit, 3)],
            ["  signal to noise A/√(S/T)", f"{line.snr_value:.4g}"],
        ]
        if line.drive is not None and line.ratio is not None:
            rows += [
                ["  drive, zero to peak", str(line.drive.amplitude)],
                [
                    "  drive phase at t = 0",
                    "refused" if line.is_phase_refused else _angle(line.drive.phase),
                ],
                ["  response/drive", str(line.ratio.magnitude)],
                ["  phase of response/drive", _angle(line.ratio.phase)],
            ]
        trust = "; ".join(line.distrust_reasons) or "no reason for distrust found"
        rows.append(["  trust", trust])
    rows += [
        [product.text, f"{product.line.amplitude}; {_relative(product)}"]
        for product in fit.products
    ]
    clock = fit.clock_offset
    if clock is not None:
        followed = "followed" if fit.clock_applied else "not told from zero, not followed"
        rows.append(["clock offset of the lines", f"{clock}; {followed}"])
    if fit.clock_drift is not None:
        rows.append(["its drift", _parts_per_million(fit.clock_drift)])
    gaps = f"; {counted(len(fit.gaps), 'gap')}, {sum(fit.gaps)} samples" if fit.gaps else ""
    rows += [
        ["used", f"{100 * fit.used_fraction:.4g} % of {show(fit.duration_s, 's')}{gaps}"],
        ["convention", "A·cos(2πft + φ), t = 0 at the first sample of the recording"],
    ]
    return "\n\n".join([table(rows), *(_over_time(fit) if over_time else [])])


def _angle(phase: "Measured") -> str:
    """Return a phase, unknown where half a turn does not bound its error."""
    half_width = phase.coverage_factor(0.95) * float(phase.u_magnitude or 0.0)
    return str(phase) if half_width < math.pi else "unknown (U is half a turn or more)"


def _relative(product: "LineProduct") -> str:
    seen = "" if product.is_seen else ", not seen above the noise"
    return f"of the line {product.relative}{seen}"


def _parts_per_million(drift: "Measured") -> str:
    factor = drift.coverage_factor(0.95)
    value, expanded = 1e6 * float(drift.magnitude), 1e6 * factor * float(drift.u_magnitude or 0.0)
    return f"{value:.3g} ppm/s, U = {expanded:.2g} ppm/s (95 %)"


def _over_time(fit: "LineFit") -> list[str]:
    from metro.display import show
    from metro.output import table

    tables = []
    for line in fit.lines:
        course = line.course
        if course is None:
            continue
        header = [f"{line.frequency_hz:.9g} Hz, time", "amplitude", "u", "phase", "u"]
        columns = zip(
            course.time_s, course.amplitude, course.amplitude_u, course.phase_rad,
            course.phase_u_rad, strict=True,
        )  # fmt: skip
        rows = [
            [show(t, "s"), show(a, course.unit, 6), show(du, course.unit, 2), f"{p:.6g} rad", f"{dp:.2g} rad"]
            for t, a, du, p, dp in columns
        ]  # fmt: skip
        tables.append(table(rows, header=header))
    return tables
