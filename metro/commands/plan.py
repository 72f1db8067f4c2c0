"""``midfringe plan``: drive and time for a wanted uncertainty."""

from __future__ import annotations

from typing import TYPE_CHECKING

import click

from metro.options import ValueType, bench_options, command, distrust, output_options

if TYPE_CHECKING:
    from metro.bench import Bench
    from metro.plan import Plan

__all__ = ["plan"]

_AT = {
    "actuator terminals": "at the actuator's terminals",
    "amplifier input": "at the amplifier's input",
    "generator setting": "as the generator is set",
}


@command("midfringe plan --bench bench.toml --uncertainty 0.3% --out plan.json")
@click.option(
    "--uncertainty",
    type=ValueType("1", above=0.0, below=1.0),
    required=True,
    help="Wanted relative standard uncertainty of metres per volt, such as 0.3%.",
)
@click.option(
    "--line",
    "lines",
    type=ValueType("Hz", above=0.0),
    multiple=True,
    help="Frequency of a line, repeatable; without it those of the bench file.",
)
@click.option(
    "--duration",
    type=ValueType("s", above=0.0),
    help="Time of each lines recording; without it as long as needed.",
)
@click.option(
    "--compression",
    type=ValueType("1", above=0.0, maximum=0.2),
    default=0.01,
    help="Most that the curve of the fringe may take from a line; 1 % if not given.",
)
@bench_options
@output_options("out", "plot", "json", "overwrite")
def plan(
    bench: Bench,
    uncertainty: float,
    lines: tuple[float, ...],
    duration: float | None,
    compression: float,
    out: str | None,
    plot: str | None,
    as_json: bool,
    overwrite: bool,
) -> None:
    """Tell which drive at which line for which time reaches a wanted uncertainty.

    One recording of that time on each slope of the fringe is meant, after scans. The drives stay
    within the linear range of the fringe, the drive limit and the converter's range.
    """
    from metro.figure_file import check_figure
    from metro.output import check_document, to_json, write_whole
    from metro.planner import make_plan

    if out:
        check_document(out, overwrite, [bench.path])
    if plot:
        check_figure(plot, overwrite, [bench.path])
    made = make_plan(bench, uncertainty, lines, duration_s=duration, loss=compression)
    if plot:
        from metro.figure_file import save_figure
        from metro.plan_plot import plan_figure

        save_figure(plan_figure(made, bench), plot, overwrite=overwrite)
    document = to_json(made.to_dict())
    if out:
        write_whole(out, document + "\n", overwrite=overwrite)
    click.echo(document if as_json else _page(made))
    if made.all_reasons:
        distrust(made.all_reasons)


def _page(made: Plan) -> str:
    """Return the tables for people."""
    from metro.display import show
    from metro.output import table

    rows = [
        [
            show(line.frequency_hz, "Hz", 6),
            show(line.drive_v, "V", 3),
            show(line.phase_rad, "rad", 3),
            show(line.displacement_m, "m", 3),
            show(line.snr, "1", 3),
            f"{100 * line.floor_u:.3g} %",
            f"{100 * line.expected_u:.3g} %",
            f"{100 * line.compression:.2g} %",
            f"{100 * line.third_harmonic:.2g} %",
        ]
        for line in made.lines
    ]
    header = ("line", "drive", "phase", "displacement", "SNR", "floor", "expected u", "lost", "3rd")
    products = [
        [show(p.frequency_hz, "Hz", 6), f"{100 * p.relative:.2g} %", p.text] for p in made.products
    ]
    parts = [
        table(rows, header=header),
        _texts("plan", _summary(made)),
        table(products, header=("product", "of a line", "made of")),
        _texts("cautions", made.cautions),
    ]
    return "\n\n".join(part for part in parts if part)


def _summary(made: Plan) -> list[str]:
    limit = "the drives could be larger; the time is the least, or as asked for"
    if made.limit:
        limit = f"the drives cannot be larger: {made.limit}"
    return [
        f"{made.duration_s:g} s on each slope of the fringe, all lines at once",
        (
            f"drive: {made.drive_reading}, {_AT[made.drive_point]}; phase and displacement: zero to"
            " peak; u: relative standard uncertainty"
        ),
        limit,
    ]


def _texts(title: str, texts: list[str]) -> str:
    return "\n".join([title, *(f"  {text}" for text in texts)]) if texts else ""
