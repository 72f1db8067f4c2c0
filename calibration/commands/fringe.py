"""``midfringe fringe``: metres from the fringe."""

import functools
from collections.abc import Callable
from dataclasses import replace
from typing import TYPE_CHECKING, Any

import click

from firmware_bridge.reading import Reading, recording_options
from metro.bench import Bench
from metro.options import ValueType, bench_options, command, distrust, is_quiet, output_options

if TYPE_CHECKING:
    from calibration.found_extremes import Level
    from calibration.fringe_reading import FringeReading
    from calibration.ruler import Ruler
    from firmware_bridge.trace import Recording, Trace

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
@click.argument("file")
@click.option(
    "--line",
    "lines_hz",
    multiple=True,
    type=ValueType("Hz", above=0.0),
    metavar="F",
    help="A driven line, such as 87.1Hz; repeatable. Default: the lines of the bench.",
)
@click.option(
    "--extremes",
    "extremes_file",
    metavar="FILE",
    help="A recording over whole fringes that shows the extremes.",
)
@click.option(
    "--dark", metavar="FILE|VALUE", help="The level without light: a recording or a voltage."
)
@recording_options(omit=("drive",))
@_in_counts_too
@bench_options
@output_options("out", "json", "overwrite")
def fringe(
    file: str,
    lines_hz: tuple[float, ...],
    extremes_file: str | None,
    dark: str | None,
    reading: Reading,
    levels: tuple[str | None, str | None],
    bench: Bench,
    out: str | None,
    as_json: bool,
    overwrite: bool,
) -> None:
    """Find extremes, working point and depth of each driven line in the recording FILE.

    The extremes are those given (--low and --high, in volts or counts), those of --extremes, or what
    the recording shows itself. Without a wavelength there are no metres, and that is no error.
    """
    from calibration.errors import CalibrationError
    from calibration.found_extremes import usable_scan
    from calibration.fringe_reading import read_fringe
    from metro.output import check_document, to_json, write_whole

    if out is not None:
        check_document(out, overwrite, [file, extremes_file, dark, bench.path])
    lines = list(lines_hz) or [line.frequency_hz for line in bench.lines]
    if not lines:
        raise CalibrationError("--line is needed: the frequency of each driven line, such as 1kHz")
    if extremes_file is not None and any(levels):
        raise CalibrationError("--extremes stands for --low and --high: give one or the other")
    recording = reading.open(file)
    trace = reading.signal(recording)
    low, high = _levels(levels, bench if extremes_file is None else Bench(), trace.unit)
    scan = None
    if extremes_file is not None:
        scan = usable_scan(_whole(reading, extremes_file), extremes_file)
    result = read_fringe(
        trace,
        lines,
        low=low,
        high=high,
        scan=scan,
        whole=_whole_of(reading, recording),
        dark=_dark(reading, dark, trace),
        ruler=_ruler(bench),
    )
    document = result.to_dict()
    if out is not None:
        write_whole(out, to_json(document) + "\n", overwrite=overwrite)
    click.echo(to_json(document) if as_json else _for_people(result, bench))
    reading.tell(recording)
    if result.reasons:
        distrust(result.reasons)


def _levels(
    given: tuple[str | None, str | None], bench: Bench, unit: str
) -> tuple["Level | None", "Level | None"]:
    from calibration.found_extremes import Level, level_of_text

    out: list[Level | None] = []
    for name, text in zip(("low", "high"), given, strict=True):
        entry = bench.get(f"fringe.{name}")
        if text is not None:
            out.append(level_of_text(text, f"--{name}", unit))
        elif entry is not None and not any(given):
            out.append(Level(float(entry.magnitude), float(entry.u_magnitude or 0.0)))
        else:
            out.append(None)
    return out[0], out[1]


def _whole(reading: Reading, path: str) -> "Trace":
    """Return the photodiode in a whole other recording."""
    everything = replace(reading, from_s=None, to_s=None)
    return everything.signal(everything.open(path))


def _whole_of(reading: Reading, recording: "Recording") -> "Trace | None":
    """Return the whole of the same recording where only a stretch was asked for."""
    if reading.from_s is None and reading.to_s is None:
        return None
    return replace(reading, from_s=None, to_s=None).signal(recording)


def _dark(reading: Reading, dark: str | None, trace: "Trace") -> "Level | None":
    from calibration.found_extremes import dark_of_trace, is_file, level_of_text

    if dark is None:
        return None
    if is_file(dark):
        return dark_of_trace(_whole(reading, dark))
    return level_of_text(dark, "--dark", trace.unit)


def _ruler(bench: Bench) -> "Ruler | None":
    from calibration.ruler import ruler_of

    wavelength = bench.get("laser.wavelength")
    if wavelength is None:
        return None
    trips = round(bench.magnitude("arms.round_trips", 1.0))
    return ruler_of(wavelength, bench.index(), trips)


def _for_people(result: "FringeReading", bench: Bench) -> str:
    """Return the tables that people read."""
    from metro.output import table

    fit = result.fit
    level: list[list[Any]] = [
        ["low", fit.low, result.extremes_from],
        ["high", fit.high, result.extremes_from],
        ["contrast", fit.contrast or "unknown: no --dark", "(high − low)/(high + low − 2·dark)"],
        ["working phase", fit.working_phase, "0 at the maximum; the sign cannot be told"],
        ["slope", fit.slope, "dV/dφ there"],
        ["slope per metre", fit.slope_per_metre or "unknown: no --wavelength", "dV/dx there"],
    ]
    metres: list[Any] = list(fit.displacement_amplitude or ()) or [
        "unknown: no --wavelength"
    ] * len(fit.phase_amplitude)
    lines = [
        [f"{frequency:g} Hz", depth, displacement, phase]
        for frequency, depth, displacement, phase in zip(
            result.frequencies_hz, fit.phase_amplitude, metres, fit.phase, strict=True
        )
    ]
    ways = []
    for route in result.routes:
        values = route.displacement_amplitude or route.phase_amplitude or []
        ways.append([route.route, ", ".join(map(str, values)) or "none"])
        ways.append(["", f"valid: {route.valid_range}"])
        ways += [["", f"not used: {reason}"] for reason in route.reasons]
    parts = [
        table(level),
        table(lines, ["line", "phase amplitude", "displacement", "phase at t = 0"]),
        table(ways, ["route", "amplitude"]),
    ]
    if result.agreement is not None:
        word = "consistent" if result.agreement.agree else "not consistent"
        parts.append(f"routes: normalised error {result.agreement.normalised_error:.2g}, {word}")
    if fit.displacement_amplitude and bench.in_vacuum and not is_quiet():
        parts.append("no air entry: the arms are taken to be in vacuum")
    if not result.reasons:
        parts.append("no reason for distrust found")
    return "\n\n".join(parts)
