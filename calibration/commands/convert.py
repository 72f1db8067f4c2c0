"""``midfringe convert``: a recording through a calibration to displacement, strain or phase."""

import click

from firmware_bridge.reading import Reading, recording_options
from metro.options import command, distrust, is_quiet, output_options
from metro.output import check_writable, table, to_json

__all__ = ["convert"]


@command(
    example="midfringe convert 06-lines-rising.mfr --calibration cal.json "
    "--quantity displacement --slope rising --out moved.npz"
)
@click.argument("file")
@click.option(
    "--calibration", "calibration_file", required=True, metavar="FILE", help="From calibrate."
)
@click.option(
    "--quantity",
    type=click.Choice(["displacement", "strain", "phase"]),
    default="displacement",
    show_default=True,
    help="What the values become.",
)
@click.option(
    "--slope",
    type=click.Choice(["rising", "falling"]),
    default="rising",
    show_default=True,
    help="The side of the fringe the recording lies on.",
)
@recording_options(omit=("drive",))
@output_options("out", "json", "overwrite")
def convert(
    file: str,
    calibration_file: str,
    quantity: str,
    slope: str,
    reading: Reading,
    out: str | None,
    as_json: bool,
    overwrite: bool,
) -> None:
    """Turn a recording near mid-fringe into displacement, strain or phase (CSV, NPZ or HDF5).

    Gaps stay gaps. The uncertainty is printed as a systematic part, common to all samples, and a
    random one.
    """
    from calibration.convert import ConvertedRecording
    from calibration.record import load
    from firmware_bridge.export import export_recording

    if out is None:
        raise click.UsageError("--out must name the file to write (.csv, .npz or .h5), got none")
    check_writable(out, overwrite, [file, calibration_file])
    source = reading.open(file)
    calibration = load(calibration_file)
    converted = ConvertedRecording(
        source, reading.channel_name(source), calibration, quantity, slope
    )
    samples = export_recording(
        converted, out, from_s=reading.from_s, to_s=reading.to_s, overwrite=overwrite
    )
    worth = converted.judge(reading.from_s, reading.to_s)
    document = {
        "file": out,
        "samples": samples,
        "quantity": quantity,
        "uncertainty": {
            "systematic": {"value": worth.relative_u, "unit": "1", "u": None},
            "random": {"value": worth.noise, "unit": worth.unit, "u": None},
        },
        "used_fraction": worth.used_fraction,
        "reasons": worth.reasons,
        "cautions": worth.cautions,
    }
    click.echo(to_json(document) if as_json else _text(document))
    if not is_quiet():
        reading.tell(source)
        for caution in worth.cautions:
            click.echo(f"caution: {caution}", err=True)
    if worth.reasons:
        distrust(worth.reasons)


def _text(document: dict[str, object]) -> str:
    from metro.display import show

    uncertainty = document["uncertainty"]
    assert isinstance(uncertainty, dict)  # noqa: S101  # made above
    random = uncertainty["random"]
    rows: list[list[object]] = [
        ["file", document["file"]],
        ["samples", document["samples"]],
        ["quantity", document["quantity"]],
        ["systematic u, all samples alike", f"{100 * uncertainty['systematic']['value']:.2g} %"],
        ["random, rms from sample to sample", show(random["value"], random["unit"], 2)],
        ["used", f"{100 * float(str(document['used_fraction'])):.4g} %"],
    ]
    return table(rows)
