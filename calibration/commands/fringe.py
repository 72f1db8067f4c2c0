"""``midfringe fringe``: metres from the fringe."""

import functools
from collections.abc import Callable, Mapping
from typing import TYPE_CHECKING, Any

import click

from firmware_bridge.reading import Reading, recording_options
from metro.bench import Bench
from metro.options import ValueType, bench_options, command, distrust, is_quiet, output_options

if TYPE_CHECKING:
    from calibration.fringe_answer import FringeAnswer
    from calibration.fringe_source import FringeSource
    from firmware_bridge.trace import Recording

__all__ = ["fringe"]


def _in_counts_too(function: Callable[..., Any]) -> Callable[..., Any]:
    """Let --low and --high be counts: pass them on as given, and keep them from the bench."""

    @functools.wraps(function)
    def with_levels(*args: Any, low: str | None, high: str | None, **kwargs: Any) -> Any:  # noqa: ANN401  # any command
        return function(*args, low=None, high=None, levels=(low, high), **kwargs)

    return with_levels


@command(
    example="midfringe fringe scope.csv --channel 3 --line 1kHz --low 0.5V --high 10.2V "
    '--wavelength "632.99 nm"'
)
@click.argument("files", nargs=-1, required=True, metavar="FILE...")
@click.option(
    "--line",
    "lines_hz",
    multiple=True,
    type=ValueType("Hz", above=0.0),
    metavar="F",
    help="A driven line, such as 87.1Hz; repeatable. Default: the lines of the bench.",
)
@click.option("--count", is_flag=True, help="Count fringes, even if the bench names lines.")
@click.option(
    "--extremes",
    "extremes_file",
    metavar="FILE",
    help="A recording over whole fringes that shows the extremes.",
)
@click.option(
    "--dark", metavar="FILE|VALUE", help="The level without light: a recording or a voltage."
)
@click.option("--monitor", metavar="COLUMN", help="A monitor of the laser's power to divide by.")
@click.option(
    "--antiphase", metavar="COLUMN", help="The interferometer's other port, to cancel power drift."
)
@click.option(
    "--quadrature",
    metavar="X,Y",
    help="Two detectors in quadrature, by column: phase from the ellipse they draw.",
)
@click.option(
    "--null",
    is_flag=True,
    help="Several recordings at different drives: where the line's first harmonic vanishes.",
)
@click.option(
    "--pilot",
    "pilot_hz",
    type=ValueType("Hz", above=0.0),
    metavar="F",
    help="Track a free-running bench through its fringes by this driven line.",
)
@recording_options
@_in_counts_too
@bench_options
@output_options("out", "plot", "json", "overwrite")
def fringe(
    files: tuple[str, ...],
    lines_hz: tuple[float, ...],
    count: bool,
    extremes_file: str | None,
    dark: str | None,
    monitor: str | None,
    antiphase: str | None,
    quadrature: str | None,
    null: bool,
    pilot_hz: float | None,
    reading: Reading,
    levels: tuple[str | None, str | None],
    bench: Bench,
    out: str | None,
    plot: str | None,
    as_json: bool,
    overwrite: bool,
) -> None:
    """Find extremes, working point and depth of each driven line in the recording FILE.

    Without a line, the fringes of a scan, ramp or motor run are counted instead, pass by pass; --drive
    then tells the direction. With --quadrature the phase comes from two detectors, with --pilot from a
    driven line while the bench runs freely, with --null from a series of recordings. The extremes are
    those given (--low and --high, in volts or counts), those of --extremes, or what the recording shows
    itself. Without a wavelength there are no metres, and that is no error.
    """
    from calibration.fringe_source import FringeSource
    from metro.output import check_document, to_json, write_whole

    inputs = [*files, extremes_file, dark, bench.path]
    if out is not None:
        check_document(out, overwrite, inputs)
    if plot is not None:
        from metro.figure_file import check_figure

        check_figure(plot, overwrite, [*inputs, out])
    of_bench = [] if lines_hz or count else [line.frequency_hz for line in bench.lines]
    lines = list(lines_hz) or of_bench
    ways = {"--count": count, "--quadrature": quadrature, "--null": null, "--pilot": pilot_hz}
    _check(files, lines_hz, ways, extremes_file, levels)
    recordings = [reading.open(file) for file in files]
    remarks = []
    if of_bench and not any(ways.values()):
        from calibration.fringe_answer import is_scan_without

        probe = FringeSource(reading, bench, levels, extremes_file, dark, monitor, antiphase)
        if is_scan_without(probe, recordings[0], lines):
            lines = []
            remarks = [
                "the bench's lines are not seen and fringes pass: fringes are counted; --line fits lines"
            ]
    if null or not (lines or quadrature or pilot_hz):  # these look at the drive
        reading = reading.with_drive(recordings[0], bench.text("drive.channel"))
    source = FringeSource(reading, bench, levels, extremes_file, dark, monitor, antiphase)
    answer = _answer(source, recordings, lines, quadrature, null, pilot_hz)
    if plot is not None and answer.draw is None:
        raise click.UsageError("--plot draws driven, counted and quadrature recordings only")
    remarks += _remarks(answer, bench)
    hints = []
    if answer.reasons and of_bench and lines and not any(ways.values()):
        hints = ["the lines are the bench's: a scan, ramp or motor run is counted with --count"]
    document = _document(answer, [*remarks, *hints], recordings)
    if out is not None:
        write_whole(out, to_json(document) + "\n", overwrite=overwrite)
    if plot is not None and answer.draw is not None:
        answer.draw(plot, overwrite=overwrite)
    click.echo(to_json(document) if as_json else answer.text(remarks))
    for one in recordings:
        reading.tell(one)
    if answer.reasons:
        distrust([*answer.reasons, *hints])


def _check(
    files: tuple[str, ...],
    lines_hz: tuple[float, ...],
    ways: Mapping[str, object],
    extremes_file: str | None,
    levels: tuple[str | None, str | None],
) -> None:
    from calibration.errors import CalibrationError

    chosen = [name for name, value in ways.items() if value]
    if len(chosen) > 1:
        raise CalibrationError(f"{chosen[0]} stands for {chosen[1]}: give one or the other")
    if ways["--count"] and lines_hz:
        raise CalibrationError("--count stands for --line: give one or the other")
    if len(files) > 1 and not ways["--null"]:
        raise CalibrationError(f"several recordings are for --null only, got {len(files)} files")
    if extremes_file is not None and any(levels):
        raise CalibrationError("--extremes stands for --low and --high: give one or the other")


def _answer(
    source: "FringeSource",
    recordings: "list[Recording]",
    lines: list[float],
    quadrature: str | None,
    null: bool,
    pilot_hz: float | None,
) -> "FringeAnswer":
    """Return the answer of the way that was asked for."""
    from calibration import fringe_answer, phase_answer

    if null:
        return fringe_answer.null_answer(source, recordings, lines)
    if quadrature is not None:
        return phase_answer.quadrature_answer(source, recordings[0], quadrature, lines)
    if pilot_hz is not None:
        return phase_answer.tracked_answer(source, recordings[0], pilot_hz, lines)
    if lines:
        return fringe_answer.driven_answer(source, recordings[0], lines)
    return fringe_answer.counted_answer(source, recordings[0])


def _document(
    answer: "FringeAnswer", remarks: list[str], recordings: "list[Recording]"
) -> dict[str, Any]:
    """Return the JSON document with what else is said: remarks, and what the recordings say."""
    from firmware_bridge.reading import opened_reasons

    reasons = [*answer.document["reasons"], *opened_reasons()]
    said = [f"{one.path}: {text}" for one in recordings for text in one.remarks]
    told = [text for text in dict.fromkeys(said) if text not in reasons]
    return {
        **answer.document,
        "trustworthy": not reasons,
        "reasons": reasons,
        "remarks": [*remarks, *told],
    }


def _remarks(answer: "FringeAnswer", bench: Bench) -> list[str]:
    if answer.in_metres and bench.in_vacuum and not is_quiet():
        return ["no air entry: the arms are taken to be in vacuum"]
    return []
