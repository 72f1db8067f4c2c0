"""``midfringe fringe``: metres from the fringe."""

import functools
from collections.abc import Callable, Mapping, Sequence
from dataclasses import dataclass, replace
from typing import TYPE_CHECKING, Any

import click

from firmware_bridge.reading import Reading, recording_options
from metro.bench import Bench
from metro.options import ValueType, bench_options, command, distrust, is_quiet, output_options

if TYPE_CHECKING:
    from calibration.found_extremes import Level
    from calibration.ruler import Ruler
    from calibration.scan import ScanFit
    from firmware_bridge.trace import Recording, Trace

__all__ = ["fringe"]


@dataclass(frozen=True)
class _Answer:
    """What a way through the command gave: a document, text for people, a drawing."""

    document: dict[str, Any]
    text: str
    reasons: Sequence[str]
    draw: Callable[[str, bool], None] | None = None


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
    driven line while the bench runs freely, with --null from a series of recordings. The extremes are those given (--low and --high, in volts or counts), those
    of --extremes, or what the recording shows itself. Without a wavelength there are no metres, and
    that is no error.
    """
    from metro.output import check_document, to_json, write_whole

    inputs = [*files, extremes_file, dark, bench.path]
    if out is not None:
        check_document(out, overwrite, inputs)
    if plot is not None:
        from metro.figure_file import check_figure

        check_figure(plot, overwrite, [*inputs, out])
    lines = [] if count else list(lines_hz) or [line.frequency_hz for line in bench.lines]
    ways = {"--count": count, "--quadrature": quadrature, "--null": null, "--pilot": pilot_hz}
    _check(files, lines_hz, ways, extremes_file, levels)
    task = _Task(reading, bench, levels, extremes_file, dark, monitor, antiphase)
    recordings = [reading.open(file) for file in files]
    recording = recordings[0]
    if null:
        answer = task.nulls(recordings, lines)
    elif quadrature is not None:
        answer = task.in_quadrature(recording, quadrature, lines)
    elif pilot_hz is not None:
        answer = task.tracked(recording, pilot_hz, lines)
    else:
        answer = task.driven(recording, lines) if lines else task.counted(recording)
    if plot is not None and answer.draw is None:
        raise click.UsageError("--plot draws driven, counted and quadrature recordings only")
    if out is not None:
        write_whole(out, to_json(answer.document) + "\n", overwrite=overwrite)
    if plot is not None and answer.draw is not None:
        answer.draw(plot, overwrite)
    click.echo(to_json(answer.document) if as_json else answer.text)
    for one in recordings:
        reading.tell(one)
    if answer.reasons:
        distrust(answer.reasons)


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


@dataclass(frozen=True)
class _Task:
    """The options that both ways through the command share."""

    reading: Reading
    bench: Bench
    levels: tuple[str | None, str | None]
    extremes_file: str | None
    dark: str | None
    monitor: str | None
    antiphase: str | None

    def driven(self, recording: "Recording", lines: list[float]) -> _Answer:
        """Fit driven lines."""
        from calibration.driven_plot import save_driven_plot
        from calibration.fringe_reading import read_fringe
        from calibration.fringe_tables import driven_tables

        trace = self._trace(recording, self.reading)
        low, high = self._levels(trace.unit)
        result = read_fringe(
            trace,
            lines,
            low=low,
            high=high,
            scan=self._scan(),
            whole=self._whole_of(recording),
            dark=self._dark(trace.unit),
            ruler=self._ruler(),
        )
        remarks = self._remarks(bool(result.fit.displacement_amplitude))
        return _Answer(
            result.to_dict(),
            driven_tables(result, remarks),
            result.reasons,
            lambda path, overwrite: save_driven_plot(result, trace, path, overwrite=overwrite),
        )

    def counted(self, recording: "Recording") -> _Answer:
        """Count fringes."""
        from calibration.count_plot import save_count_plot
        from calibration.count_reading import read_count
        from calibration.found_extremes import Level
        from calibration.fringe_tables import count_tables

        trace = self._trace(recording, self.reading)
        low, high = self._levels(trace.unit)
        scan = self._scan()
        if scan is not None:
            low, high = Level(scan.low, scan.low_u), Level(scan.high, scan.high_u)
        drive = self.reading.drive(recording)
        if drive is not None:
            drive = replace(drive, values=drive.values * self._polarity())
        result = read_count(
            trace,
            drive,
            low=low,
            high=high,
            dark=self._dark(trace.unit),
            ruler=self._ruler(),
        )
        return _Answer(
            result.to_dict(),
            count_tables(result, self._remarks(result.ruler is not None)),
            result.reasons,
            lambda path, overwrite: save_count_plot(result, path, overwrite=overwrite),
        )

    def in_quadrature(self, recording: "Recording", columns: str, lines: list[float]) -> _Answer:
        """Read two detectors in quadrature."""
        from calibration.errors import CalibrationError
        from calibration.quadrature_plot import save_quadrature_plot
        from calibration.quadrature_reading import quadrature_tables, read_quadrature

        names = [name.strip() for name in columns.split(",")]
        if len(names) != 2 or not all(names):
            raise CalibrationError(f"--quadrature needs two columns, such as 2,3, got {columns!r}")
        if any(self.levels) or self.extremes_file or self.monitor or self.antiphase:
            raise CalibrationError(
                "--quadrature finds offsets and gains itself: leave out --low, --high, --extremes, "
                "--monitor and --antiphase"
            )
        span = self.reading.from_s, self.reading.to_s
        x, y = (recording.trace(name, *span) for name in names)
        result = read_quadrature(x, y, lines, ruler=self._ruler())
        return _Answer(
            result.to_dict(),
            quadrature_tables(result, self._remarks(result.ruler is not None)),
            result.reasons,
            lambda path, overwrite: save_quadrature_plot(result, x, y, path, overwrite=overwrite),
        )

    def nulls(self, recordings: list["Recording"], lines: list[float]) -> _Answer:
        """Find the nulls of one line over a series of drives."""
        from calibration.errors import CalibrationError
        from calibration.null_reading import null_tables, read_nulls

        if len(lines) != 1:
            raise CalibrationError(f"--null needs one --line, got {len(lines)}")
        pairs = []
        for recording in recordings:
            drive = self.reading.drive(recording)
            if drive is None:
                raise CalibrationError("--null needs --drive, the column of the drive monitor")
            pairs.append((self._trace(recording, self.reading), drive))
        result = read_nulls(pairs, lines[0], ruler=self._ruler())
        text = null_tables(result, self._remarks(result.ruler is not None))
        return _Answer(result.to_dict(), text, result.reasons)

    def tracked(self, recording: "Recording", pilot_hz: float, lines: list[float]) -> _Answer:
        """Track a free-running bench."""
        from calibration.errors import CalibrationError
        from calibration.found_extremes import Level, usable_scan
        from calibration.tracked_reading import read_tracked, tracked_tables

        trace = self._trace(recording, self.reading)
        low, high = self._levels(trace.unit)
        scan, reasons = self._scan(), []
        if scan is None and low is None and high is None:
            scan = usable_scan(trace, recording.path)  # it runs over whole fringes itself
        if scan is not None:
            low, high = Level(scan.low, scan.low_u), Level(scan.high, scan.high_u)
            reasons = [f"extremes: {reason}" for reason in scan.reasons]
        if low is None or high is None:
            raise CalibrationError("low and high must be given together")
        result = read_tracked(
            trace,
            pilot_hz,
            lines,
            low,
            high,
            drive=self.reading.drive(recording),
            polarity=self._polarity(),
            ruler=self._ruler(),
        )
        result = replace(result, reasons=[*reasons, *result.reasons])
        text = tracked_tables(result, self._remarks(result.ruler is not None))
        return _Answer(result.to_dict(), text, result.reasons)

    def _trace(self, recording: "Recording", reading: Reading) -> "Trace":
        """Return the photodiode, the power's drift taken out where that was asked for."""
        from calibration.found_extremes import is_file, unit_of_text
        from calibration.power_ratio import without_power_drift

        trace = reading.signal(recording)
        if self.antiphase is None:
            given = [*self.levels, None if self.dark is None or is_file(self.dark) else self.dark]
            trace = replace(trace, unit=unit_of_text(given, trace.unit))
        other = [
            None if name is None else recording.trace(name, reading.from_s, reading.to_s)
            for name in (self.monitor, self.antiphase)
        ]
        if other == [None, None]:
            return trace
        return without_power_drift(trace, other[0], other[1], self._dark(trace.unit))

    def _levels(self, unit: str) -> tuple["Level | None", "Level | None"]:
        from calibration.found_extremes import Level, level_of_text

        out: list[Level | None] = []
        for name, text in zip(("low", "high"), self.levels, strict=True):
            entry = self.bench.get(f"fringe.{name}") if self.extremes_file is None else None
            if text is not None:
                out.append(level_of_text(text, f"--{name}", unit))
            elif entry is not None and not any(self.levels):
                out.append(Level(float(entry.magnitude), float(entry.u_magnitude or 0.0)))
            else:
                out.append(None)
        return out[0], out[1]

    def _scan(self) -> "ScanFit | None":
        """Return the extremes of --extremes, None without it."""
        from calibration.found_extremes import usable_scan

        if self.extremes_file is None:
            return None
        everything = replace(self.reading, from_s=None, to_s=None)
        other = self._trace(everything.open(self.extremes_file), everything)
        return usable_scan(other, self.extremes_file)

    def _whole_of(self, recording: "Recording") -> "Trace | None":
        """Return the whole of the same recording where only a stretch was asked for."""
        if self.reading.from_s is None and self.reading.to_s is None:
            return None
        return self._trace(recording, replace(self.reading, from_s=None, to_s=None))

    def _dark(self, unit: str) -> "Level | None":
        from calibration.found_extremes import dark_of_trace, is_file, level_of_text

        if self.dark is None:
            return None
        if is_file(self.dark):
            everything = replace(self.reading, from_s=None, to_s=None)
            return dark_of_trace(everything.signal(everything.open(self.dark)))
        return level_of_text(self.dark, "--dark", unit)

    def _ruler(self) -> "Ruler | None":
        from calibration.ruler import ruler_of

        wavelength = self.bench.get("laser.wavelength")
        if wavelength is None:
            return None
        trips = round(self.bench.magnitude("arms.round_trips", 1.0))
        return ruler_of(wavelength, self.bench.index(), trips)

    def _polarity(self) -> int:
        """Return 1 where the drive makes the differential arm length grow, as the bench declares."""
        declared = round(self.bench.magnitude("actuator.polarity", 1.0))
        return -declared if self.bench.text("actuator.arm") == "y" else declared

    def _remarks(self, in_metres: bool) -> list[str]:
        if in_metres and self.bench.in_vacuum and not is_quiet():
            return ["no air entry: the arms are taken to be in vacuum"]
        return []
