"""``midfringe calibrate``: a session's recordings and the bench file to a calibration."""

from pathlib import Path
from typing import Any

import click

from metro.bench import Bench
from metro.figure_file import check_figure
from metro.options import ValueType, bench_options, command, distrust, is_quiet, output_options
from metro.output import check_document, to_json, write_whole

__all__ = ["calibrate"]

_ROLES = {
    "dark": "Beam blocked, drive off.",
    "pickup": "Beam blocked, drive on.",
    "blocked-x": "X arm blocked, y arm alone, drive on.",
    "blocked-y": "Y arm blocked, x arm alone, drive on.",
    "scan": "Over whole fringes, both directions.",
    "lines-rising": "Lines driven, on the rising slope.",
    "lines-falling": "Lines driven, on the falling slope.",
    "lines-free": "Lines driven on a bench that runs freely through its fringes.",
    "series": "Lines at several drives, up and down, in the order recorded; on either slope.",
}


def _role_options(function: Any) -> Any:  # noqa: ANN401  # a click decorator
    for role, text in reversed(_ROLES.items()):
        function = click.option(
            f"--{role}", multiple=True, metavar="FILE", help=f"{text} Repeatable."
        )(function)
    return function


@command(
    example="midfringe calibrate --bench bench.toml --scan 05-scan.mfr "
    "--lines-rising 06-lines-rising.mfr --lines-falling 07-lines-falling.mfr --out cal.json"
)
@_role_options
@click.option(
    "--pilot",
    "pilot_hz",
    type=ValueType("Hz", above=0.0),
    metavar="F",
    help="The driven line by which --lines-free is tracked. Default: the bench's highest.",
)
@click.option(
    "--repeat",
    "repeat_files",
    multiple=True,
    metavar="FILE",
    help="Calibrations of this bench after other alignments: their scatter counts. Repeatable.",
)
@click.option(
    "--open-loop",
    "open_loop_file",
    metavar="FILE",
    help="Table of the open-loop gain of a servo that held the mirror (frequency, magnitude, phase, "
    "u_magnitude, u_phase), the drive being read before the point where the servo acts; a large "
    "positive gain holds the mirror.",
)
@click.option(
    "--routes/--no-routes",
    "compare",
    default=True,
    show_default=True,
    help="Compare the slopes, or the free-running bench, with the driven fringe, which takes some seconds.",
)
@bench_options
@output_options("out", "plot", "json", "overwrite")
def calibrate(
    bench: Bench,
    pilot_hz: float | None,
    repeat_files: tuple[str, ...],
    open_loop_file: str | None,
    compare: bool,
    out: str | None,
    plot: str | None,
    as_json: bool,
    overwrite: bool,
    **roles: tuple[str, ...],
) -> None:
    """Turn a session's recordings and the bench file into a calibration with its budget.

    --scan and one of --lines-rising, --lines-falling and --lines-free are the least; what is missing
    becomes a caution and an entry of the budget. With lines on a slope, --lines-free is a second route
    that is compared with it.
    """
    from calibration.analysis import calibrate as run
    from calibration.open_loop import load_open_loop
    from calibration.record import load
    from calibration.summary import calibration_text

    recordings = [path for paths in roles.values() for path in paths]
    inputs = [bench.path, *recordings, *repeat_files, open_loop_file]
    if out is not None:
        check_document(out, overwrite, inputs)
    if plot is not None:
        check_figure(plot, overwrite, inputs)
    by_role: dict[str, Any] = dict(roles)  # paths by parameter, beside others of other types
    result = run(
        bench,
        **by_role,
        repeat=[load(path) for path in repeat_files],
        open_loop=None if open_loop_file is None else load_open_loop(open_loop_file),
        pilot_hz=pilot_hz,
        compare=compare,
        kept_in=None if out is None else Path(out).parent,
    )
    document = to_json(result.to_dict())
    if plot is not None:
        from calibration.session_plot import Shown, save_session_page

        shown = Shown.of_files(result, roles)
        save_session_page(result, shown, [], "Calibration", plot, overwrite=overwrite)
    if out is not None:
        write_whole(out, document + "\n", overwrite=overwrite)
    click.echo(document if as_json else calibration_text(result))
    if not is_quiet():
        for caution in result.cautions:
            click.echo(f"caution: {caution}", err=True)
    if not result.is_trustworthy:
        distrust(result.all_reasons)
