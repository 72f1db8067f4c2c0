"""``midfringe spectrum``: amplitude spectral density beside the noise the bench should have."""

from dataclasses import replace
from typing import TYPE_CHECKING

import click

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
    from calibration.record import Calibration
    from calibration.spectrum import Spectrum
    from firmware_bridge.trace import Recording
    from metro.bench import Bench

__all__ = ["spectrum"]


@command(
    example="midfringe spectrum rehearsal/06-lines-rising.mfr --calibration rehearsal/calibration.json "
    "--bench rehearsal/bench.toml --plot spectrum.png"
)
@click.argument("file")
@click.option(
    "--calibration",
    "calibration_file",
    metavar="FILE",
    help="From calibrate; without it the density is that of the photodiode's voltage.",
)
@click.option(
    "--quantity",
    type=click.Choice(["displacement", "strain", "phase"]),
    default=None,
    help="With --calibration: what the values become. Default: displacement.",
)
@click.option(
    "--slope",
    type=click.Choice(["rising", "falling"]),
    default="rising",
    show_default=True,
    help="The side of the fringe the recording lies on.",
)
@click.option(
    "--resolution",
    "resolution_hz",
    type=ValueType("Hz", above=0.0),
    metavar="VALUE",
    help="Distance of the bins, such as 0.5Hz. Default: about sixteen segments.",
)
@recording_options(omit=("drive",))
@bench_options
@output_options("out", "plot", "json", "overwrite")
def spectrum(
    file: str,
    calibration_file: str | None,
    quantity: str | None,
    slope: str,
    resolution_hz: float | None,
    reading: Reading,
    bench: "Bench",
    out: str | None,
    plot: str | None,
    as_json: bool,
    overwrite: bool,
) -> None:
    """Show the amplitude spectral density of a recording, and the noise the bench should have.

    One-sided, after Welch, Hann window, overlap 50 %. Segments with a gap or an over-range sample are
    left out, never bridged. With --calibration it is that of displacement, strain or phase; a bench
    adds what is expected, and the ratio of the two. --out writes CSV where the name ends in .csv, else
    JSON.
    """
    from calibration.record import load
    from metro.figure_file import check_figure, save_figure
    from metro.output import check_document, check_writable, to_json, write_whole

    if quantity is not None and calibration_file is None:
        raise click.UsageError(f"--quantity {quantity} needs --calibration, got none")
    inputs = [file, bench.path, calibration_file]
    if out is not None:
        is_table = out.lower().endswith(".csv")
        (check_writable if is_table else check_document)(out, overwrite, inputs)
    if plot is not None:
        check_figure(plot, overwrite, inputs)
    calibration = None if calibration_file is None else load(calibration_file)
    recording = reading.open(file)
    kind = "voltage" if calibration is None else quantity or "displacement"
    found, systematic, reasons, cautions = _found(
        recording, reading, calibration, kind, slope, resolution_hz
    )
    found = _with_expected(found, recording, reading, bench, calibration, kind)
    document = {**found.to_dict(), "quantity": kind, "systematic": systematic, "reasons": reasons}
    document["cautions"] = cautions
    text = to_json(document)
    if out is not None:
        content = _as_csv(found) if out.lower().endswith(".csv") else text + "\n"
        write_whole(out, content, overwrite=overwrite)
    if plot is not None:
        from calibration.spectrum_plot import spectrum_figure

        save_figure(spectrum_figure(found, file, kind), plot, overwrite=overwrite)
    click.echo(text if as_json else _for_people(found, kind, systematic))
    reading.tell(recording)
    if not is_quiet():
        for remark in (*found.remarks, *(cautions if is_verbose() else [])):
            click.echo(f"caution: {remark}", err=True)
    if reasons:
        distrust(reasons)


def _found(
    recording: "Recording",
    reading: Reading,
    calibration: "Calibration | None",
    kind: str,
    slope: str,
    resolution_hz: float | None,
) -> tuple["Spectrum", float, list[str], list[str]]:
    """Return the spectrum, the relative u common to all bins, reasons for distrust and cautions."""
    from calibration.convert import ConvertedRecording
    from calibration.spectrum import find_spectrum

    channel, stretch = reading.channel_name(recording), (reading.from_s, reading.to_s)
    if calibration is None:
        found = find_spectrum(
            recording, channel, from_s=stretch[0], to_s=stretch[1], resolution_hz=resolution_hz
        )
        return found, 0.0, [], []
    converted = ConvertedRecording(recording, channel, calibration, kind, slope)
    found = find_spectrum(
        converted, "1", from_s=stretch[0], to_s=stretch[1], resolution_hz=resolution_hz
    )
    worth = converted.judge(*stretch)
    return found, worth.relative_u, worth.reasons, worth.cautions


def _with_expected(
    found: "Spectrum",
    recording: "Recording",
    reading: Reading,
    bench: "Bench",
    calibration: "Calibration | None",
    kind: str,
) -> "Spectrum":
    from calibration.expected_noise import bench_as_measured, expected_noise

    channel = recording.channels[recording.find(reading.channel_name(recording))]
    measured = bench_as_measured(bench, recording.rate_hz, channel, calibration)
    if kind == "voltage" and found.unit != "V":
        return found
    expected = expected_noise(measured, kind, found.welch.frequency_hz)
    if expected is None:
        remark = "no expected noise: no noise source is known; give --bench"
        return replace(found, remarks=(*found.remarks, remark))
    remarks = [*found.remarks, *expected.remarks]
    if expected.missing:
        names = ", ".join(name.replace("_", " ") for name in expected.missing)
        remarks.append(f"the expected noise lacks, for want of entries in the bench: {names}")
    return replace(found, expected=expected, remarks=tuple(remarks))


def _as_csv(found: "Spectrum") -> str:
    import numpy as np

    unit = f"{found.unit}/Hz**0.5"
    names = ["frequency", "density", "u"]
    columns = [found.welch.frequency_hz, found.welch.density, found.welch.density_u]
    units = ["Hz", unit, unit]
    if found.expected is not None and found.ratio is not None:
        names += ["expected", "ratio"]
        columns += [found.expected.density, found.ratio]
        units += [unit, "1"]
    rows = (",".join(map(repr, row)) for row in np.column_stack(columns).tolist())
    return "\n".join([",".join(names), ",".join(units), *rows]) + "\n"


def _for_people(found: "Spectrum", kind: str, systematic: float) -> str:
    from metro.display import show
    from metro.output import table

    welch, unit = found.welch, f"{found.unit}/Hz**0.5"
    rows: list[list[object]] = [
        ["window", f"Hann, {found.segment} samples, overlap 50 %"],
        ["noise bandwidth", show(welch.noise_bandwidth_hz, "Hz")],
        ["segments", f"{welch.segments}, worth {welch.averages:.1f} independent ones"],
        ["u of a bin", f"{50 / welch.averages**0.5:.2g} %, in steady noise"],
        [
            "used",
            f"{100 * found.used_fraction:.4g} %; gaps {found.gaps}, over range {found.over_range}",
        ],
    ]
    if systematic:
        rows.append(["u of all bins alike", f"{100 * systematic:.2g} %"])
    rows += [
        [f"line at {line.frequency_hz:.6g} Hz", show(line.amplitude, found.unit)]
        for line in found.lines
    ]
    rows.append(["convention", "one-sided amplitude density; lines zero to peak"])
    return f"{table(rows)}\n\n{_bands(found, kind, unit)}"


def _bands(found: "Spectrum", kind: str, unit: str) -> str:
    """Return the density at a few frequencies: medians of a third of an octave, which lines do not move."""
    import numpy as np

    from metro.display import show
    from metro.output import table

    frequency = found.welch.frequency_hz
    rows: list[list[object]] = []
    for exponent in range(-12, 24):
        for step in (1.0, 2.0, 5.0):
            centre = step * 10.0**exponent
            near = (frequency > 0) & (
                np.abs(np.log2(np.maximum(frequency, 1e-30) / centre)) < 1 / 6
            )
            if not near.any() or not frequency[1] <= centre <= frequency[-1]:
                continue
            row: list[object] = [
                show(centre, "Hz"), show(float(np.median(found.welch.density[near])), unit, 3)
            ]  # fmt: skip
            if found.expected is not None and found.ratio is not None:
                row.append(show(float(np.median(found.expected.density[near])), unit, 3))
                row.append(f"{float(np.median(found.ratio[near])):.3g}")
            rows.append(row)
    header = ["frequency", kind]
    return table(rows, header=header + (["expected", "ratio"] if found.expected else []))
