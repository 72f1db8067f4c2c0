"""``midfringe convert``: a recording through a calibration to displacement, strain or phase."""

from typing import TYPE_CHECKING, Any

import click

from firmware_bridge.reading import Reading, recording_options
from metro.figure_file import check_figure
from metro.options import command, distrust, is_quiet, output_options
from metro.output import check_writable, table, to_json

if TYPE_CHECKING:
    from calibration.convert import ConvertedRecording
    from calibration.driven_displacement import DrivenDisplacement
    from calibration.record import Calibration
    from firmware_bridge.trace import Recording

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
@click.option(
    "--undo-readout", is_flag=True, help="Undo what amplifier and anti-alias filter take off."
)
@click.option(
    "--open-loop",
    "open_loop_file",
    metavar="FILE",
    help="Restore the free displacement that a servo took off: table of its open-loop gain "
    "(frequency, magnitude, phase, u_magnitude, u_phase); a large positive gain holds the mirror.",
)
@click.option(
    "--actuator",
    is_flag=True,
    help="Convert the drive's channel instead: what it moves, by the response between the lines.",
)
@recording_options(omit=("drive",))
@output_options("out", "plot", "json", "overwrite")
def convert(
    file: str,
    calibration_file: str,
    quantity: str,
    slope: str,
    undo_readout: bool,
    open_loop_file: str | None,
    actuator: bool,
    reading: Reading,
    out: str | None,
    plot: str | None,
    as_json: bool,
    overwrite: bool,
) -> None:
    """Turn a recording near mid-fringe into displacement, strain or phase (CSV, NPY, NPZ or HDF5).

    Recordings of any size are converted in bounded memory. Gaps stay gaps. The uncertainty is
    printed, and kept in NPZ and HDF5, as a systematic part, common to all samples, and a random one.
    """
    from calibration.record import load
    from firmware_bridge.export import export_recording

    if out is None:
        raise click.UsageError(
            "--out must name the file to write (.csv, .npy, .npz or .h5), got none"
        )
    inputs = [file, calibration_file, open_loop_file]
    check_writable(out, overwrite, inputs)
    if plot is not None:
        check_figure(plot, overwrite, inputs)
    if actuator and (quantity != "displacement" or undo_readout or open_loop_file):
        raise click.UsageError(
            "--actuator gives displacement from the drive: it goes without --quantity, "
            "--undo-readout and --open-loop"
        )
    source, calibration = reading.open(file), load(calibration_file)
    if actuator:
        converted: Any = _driven(source, reading, calibration)
    else:
        options = (quantity, slope, undo_readout, open_loop_file)
        converted = _converted(source, reading, calibration, *options)
    worth = converted.judge(reading.from_s, reading.to_s)
    side = [] if actuator else _side(source, reading, calibration, slope)
    uncertainty = {
        "systematic": {"value": worth.relative_u, "unit": "1", "u": None},
        "random": {"value": worth.noise, "unit": worth.unit, "u": None},
    }
    samples = export_recording(
        converted,
        out,
        from_s=reading.from_s,
        to_s=reading.to_s,
        overwrite=overwrite,
        beside={"quantity": quantity, "uncertainty": uncertainty, "reasons": worth.reasons},
    )
    document = {
        "file": out,
        "samples": samples,
        "quantity": quantity,
        "uncertainty": uncertainty,
        "used_fraction": worth.used_fraction,
        "gaps": len(converted.gaps),
        "reasons": worth.reasons,
        "cautions": [*worth.cautions, *side],
    }
    if plot is not None:
        _draw(converted, reading, plot, f"u {_percent(worth.relative_u)} common", overwrite)
    click.echo(to_json(document) if as_json else _text(document))
    if not is_quiet():
        reading.tell(source)
        for caution in (*worth.cautions, *side):
            click.echo(f"caution: {caution}", err=True)
    if worth.reasons:
        distrust(worth.reasons)


def _converted(
    source: "Recording",
    reading: Reading,
    calibration: "Calibration",
    quantity: str,
    slope: str,
    undo_readout: bool,
    open_loop_file: str | None,
) -> "ConvertedRecording":
    from calibration.conversion_filter import loop_stage, readout_stage
    from calibration.convert import ConvertedRecording
    from calibration.open_loop import load_open_loop

    stages = [readout_stage(calibration, source.rate_hz)] if undo_readout else []
    if open_loop_file is not None:
        stages.append(loop_stage(load_open_loop(open_loop_file), source.rate_hz))
    return ConvertedRecording(
        source, reading.channel_name(source), calibration, quantity, slope, stages
    )


def _side(
    source: "Recording", reading: Reading, calibration: "Calibration", slope: str
) -> list[str]:
    from calibration.slope_side import side_cautions

    return side_cautions(source, reading.channel_name(source), calibration, slope)


def _driven(
    source: "Recording", reading: Reading, calibration: "Calibration"
) -> "DrivenDisplacement":
    from calibration.driven_displacement import DrivenDisplacement

    names = [channel.name for channel in source.channels]
    default = "name:drive" if "drive" in names else reading.channel_name(source)
    return DrivenDisplacement(source, reading.channel or default, calibration)


def _draw(
    converted: "Recording", reading: Reading, plot: str, u_text: str, overwrite: bool
) -> None:
    from calibration.convert_plot import course_of, save_course

    course = course_of(converted, reading.from_s, reading.to_s)
    save_course(converted, course, u_text, plot, overwrite=overwrite)


def _percent(relative: float) -> str:
    return f"{100 * relative:.2g} %"


def _text(document: dict[str, Any]) -> str:
    from metro.display import show

    uncertainty = document["uncertainty"]
    random = uncertainty["random"]
    rows: list[list[object]] = [
        ["file", document["file"]],
        ["samples", document["samples"]],
        ["gaps", document["gaps"]],
        ["quantity", document["quantity"]],
        ["systematic u, all samples alike", _percent(uncertainty["systematic"]["value"])],
        ["random, rms from sample to sample", show(random["value"], random["unit"], 2)],
        ["used", f"{100 * float(document['used_fraction']):.4g} %"],
    ]
    return table(rows)
