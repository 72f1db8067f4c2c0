"""``midfringe spectrum``: amplitude spectral density beside the noise the bench should have."""

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
    from calibration.spectrum import Spectrum
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
    "--undo-readout", is_flag=True, help="Undo what amplifier and anti-alias filter take off."
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
    undo_readout: bool,
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
    from calibration.spectrum_reading import read_spectrum
    from calibration.spectrum_table import spectrum_csv
    from metro.figure_file import check_figure, save_figure
    from metro.output import check_document, check_writable, to_json, write_whole

    if quantity is not None and calibration_file is None:
        raise click.UsageError(f"--quantity {quantity} needs --calibration, got none")
    if undo_readout and calibration_file is None:
        raise click.UsageError("--undo-readout needs --calibration, got none")
    inputs = [file, bench.path, calibration_file]
    if out is not None:
        is_table = out.lower().endswith(".csv")
        (check_writable if is_table else check_document)(out, overwrite, inputs)
    if plot is not None:
        check_figure(plot, overwrite, inputs)
    calibration = None if calibration_file is None else load(calibration_file)
    recording = reading.open(file)
    kind = "voltage" if calibration is None else quantity or "displacement"
    found, worth = read_spectrum(
        recording,
        reading.channel_name(recording),
        bench,
        calibration,
        kind,
        slope,
        from_s=reading.from_s,
        to_s=reading.to_s,
        resolution_hz=resolution_hz,
        undo_readout=undo_readout,
    )
    reasons, cautions = ([], []) if worth is None else (worth.reasons, worth.cautions)
    systematic = 0.0 if worth is None else worth.relative_u
    document = {**found.to_dict(), "quantity": kind, "systematic": systematic}
    against = [*reasons, *reading.reasons(recording)]
    text = to_json(document | {"reasons": against, "cautions": cautions})
    if out is not None:
        content = spectrum_csv(found) if out.lower().endswith(".csv") else text + "\n"
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


def _for_people(found: "Spectrum", kind: str, systematic: float) -> str:
    from calibration.spectrum_table import band_rows
    from metro.display import show
    from metro.output import table

    welch = found.welch
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
    header = ["frequency", kind, *(["expected", "ratio"] if found.expected else [])]
    return f"{table(rows)}\n\n{table(band_rows(found), header=header)}"
