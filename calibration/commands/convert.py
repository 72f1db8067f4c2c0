"""``midfringe convert``: a recording through a calibration to displacement, strain or phase."""

from collections.abc import Mapping
from typing import TYPE_CHECKING, Any

import click

from calibration.caution_lines import caution_lines
from firmware_bridge.reading import Reading, recording_options
from metro.figure_file import check_figure
from metro.options import ValueType, command, distrust, is_quiet, is_verbose, output_options
from metro.output import check_writable, to_json

if TYPE_CHECKING:
    from calibration.convert import ConvertedRecording
    from calibration.driven_displacement import DrivenDisplacement
    from calibration.record import Calibration
    from calibration.tracked_recording import TrackedRecording
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
@click.option(
    "--pilot",
    "pilot_hz",
    type=ValueType("Hz", above=0.0),
    metavar="F",
    help="Track a free-running bench through its fringes by this driven line; --drive, or a channel "
    "called drive, sets the sign.",
)
@click.option(
    "--own-extremes",
    is_flag=True,
    help="With --pilot: take the fringe's extremes from the recording itself.",
)
@recording_options
@output_options("out", "plot", "json", "overwrite")
def convert(
    file: str,
    calibration_file: str,
    quantity: str,
    slope: str,
    undo_readout: bool,
    open_loop_file: str | None,
    actuator: bool,
    pilot_hz: float | None,
    own_extremes: bool,
    reading: Reading,
    out: str | None,
    plot: str | None,
    as_json: bool,
    overwrite: bool,
) -> None:
    """Turn a recording near mid-fringe into displacement, strain or phase (CSV, NPY, NPZ or HDF5).

    Recordings of any size are converted in bounded memory. Gaps stay gaps. The uncertainty is
    printed, and kept in NPZ and HDF5, as a systematic part, common to all samples, and a random one.

    With --pilot the recording may run freely through its fringes. A column "carried" then stands beside
    the values: 0 where a sample was inverted, 1 where it lies at an extreme and shows the slow course, the
    pilot and the calibration's lines only, empty or NaN where the phase is not known.
    """
    from calibration.conversion_page import page, plot_note, uncertainty_of
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
    given = {"--undo-readout": undo_readout, "--open-loop": open_loop_file}
    _check(quantity, given, actuator, pilot_hz, own_extremes, reading)
    source, calibration = reading.open(file), load(calibration_file)
    side = []
    if actuator:
        converted: Any = _driven(source, reading, calibration)
    elif pilot_hz is not None:
        converted = _tracked(source, reading, calibration, pilot_hz, quantity, own_extremes)
    else:
        options = (quantity, slope, undo_readout, open_loop_file)
        converted = _converted(source, reading, calibration, *options)
        side = _side(source, reading, calibration, slope)
    stretch = () if pilot_hz is not None else (reading.from_s, reading.to_s)
    worth = converted.judge(*stretch)
    uncertainty = uncertainty_of(worth)
    more: dict[str, Any] = {}
    if pilot_hz is not None:
        more = {"carried_fraction": worth.carried_fraction, "assumptions": worth.assumptions}
    samples = export_recording(
        converted,
        out,
        from_s=reading.from_s,
        to_s=reading.to_s,
        overwrite=overwrite,
        beside={
            "quantity": quantity,
            "uncertainty": uncertainty,
            "reasons": worth.reasons,
            **more,
        },
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
        **more,
    }
    if plot is not None:
        _draw(converted, reading, plot, plot_note(uncertainty), overwrite)
    click.echo(to_json(document) if as_json else page(document))
    if not is_quiet():
        reading.tell(source)
        cautions = (*worth.cautions, *side)
        for caution in caution_lines(cautions, calibration.cautions, is_verbose=is_verbose()):
            click.echo(f"caution: {caution}", err=True)
    if worth.reasons:
        distrust(worth.reasons)


def _check(
    quantity: str,
    given: Mapping[str, object],
    actuator: bool,
    pilot_hz: float | None,
    own_extremes: bool,
    reading: Reading,
) -> None:
    """Refuse options that do not go together."""
    if actuator and (quantity != "displacement" or any(given.values())):
        raise click.UsageError(
            "--actuator gives displacement from the drive: it goes without --quantity, "
            "--undo-readout and --open-loop"
        )
    if pilot_hz is None:
        alone = {"--own-extremes": own_extremes, "--drive": reading.drive_channel}
        for name in [name for name, value in alone.items() if value]:
            raise click.UsageError(f"{name} is for a free-running bench: it needs --pilot")
        return
    context = click.get_current_context()
    chosen = context.get_parameter_source("slope") is click.core.ParameterSource.COMMANDLINE
    ways = {**given, "--actuator": actuator, "--slope": chosen}
    for name in [name for name, value in ways.items() if value]:
        raise click.UsageError(
            f"--pilot follows a bench that runs freely over both slopes: it goes without {name}"
        )


def _tracked(
    source: "Recording",
    reading: Reading,
    calibration: "Calibration",
    pilot_hz: float,
    quantity: str,
    own_extremes: bool,
) -> "TrackedRecording":
    from calibration.tracked_recording import TrackedRecording

    name = reading.channel_name(source)
    drive = reading.with_drive(source).drive_channel
    span = reading.from_s, reading.to_s
    return TrackedRecording(
        source, name, calibration, pilot_hz, quantity, drive, *span, own=own_extremes
    )


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
