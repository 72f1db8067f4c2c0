"""``midfringe expect``: one stage in, every stage out, with noise and detectability."""

from __future__ import annotations

from typing import TYPE_CHECKING, Any

import click

from metro.errors import MetroError
from metro.options import ValueType, bench_options, command, output_options

if TYPE_CHECKING:
    from metro.bench import Bench
    from metro.chain import Chain

__all__ = ["expect"]

_GIVEN = ("strain", "displacement", "phase", "fringes", "voltage", "counts")


@command(
    'midfringe expect --displacement 1pm --wavelength "632.9908 nm" --power 80uW --responsivity 0.4A/W'
)
@click.option("--strain", metavar="VALUE", help="Strain amplitude h, such as 1e-21.")
@click.option(
    "--length-strain",
    metavar="VALUE",
    help="Length strain ΔL/L of the x arm alone, such as 10ppm; another quantity than --strain.",
)
@click.option("--displacement", metavar="VALUE", help="Differential displacement, such as 1pm.")
@click.option("--phase", metavar="VALUE", help="Phase, such as 0.02rad.")
@click.option("--fringes", metavar="VALUE", help="Fringes, such as 0.25.")
@click.option("--voltage", metavar="VALUE", help="Voltage change, such as 3mV.")
@click.option("--counts", metavar="VALUE", help="ADC counts, such as 12.")
@click.option(
    "--frequency",
    type=ValueType("Hz", above=0.0),
    help="Where noise and corrections are evaluated.",
)
@click.option(
    "--duration",
    type=ValueType("s", above=0.0),
    default=1.0,
    help="Averaging time; 1 s if not given.",
)
@click.option(
    "--snr",
    type=ValueType("1", above=0.0),
    default=1.0,
    help="Signal-to-noise ratio for which amplitude and time are told; 1 if not given.",
)
@click.option(
    "--slope",
    type=click.Choice(["rising", "falling"]),
    default="rising",
    help="Slope of mid-fringe.",
)
@click.option(
    "--working-phase", type=ValueType("rad"), help="Working point elsewhere than mid-fringe."
)
@click.option("--theta", type=ValueType("rad"), help="Polar angle of a wave's source.")
@click.option("--phi", type=ValueType("rad"), help="Azimuth of a wave's source, the x arm at 0.")
@click.option("--psi", type=ValueType("rad"), help="Polarisation angle of a wave.")
@click.option(
    "--lines",
    type=click.IntRange(1, 1000),
    default=1,
    help="Lines of this amplitude driven at once.",
)
@click.option(
    "--background",
    type=ValueType("rad", minimum=0.0),
    default=0.0,
    help="RMS phase of other motion.",
)
@bench_options
@output_options("out", "plot", "json", "overwrite")
def expect(bench: Bench, **options: Any) -> None:  # noqa: ANN401  # one option each
    """Tell what a strain, a displacement or a signal is at every stage, with the noise.

    Exactly one stage is given; the others are changes about the working point, linear.
    """
    from metro.chain import Chain
    from metro.expectation import expect as expect_of
    from metro.expectation_page import expectation_page
    from metro.fringe_law import slope_phase_rad
    from metro.output import to_json
    from metro.stages import stage_si

    stage, text = _one_stage(options)
    if stage == "length_strain":
        stage, value = "displacement", _one_arm_m(bench, text)
    else:
        value = stage_si(stage, text, f"--{stage}")
    _check_files(bench, options)
    working_phase = options["working_phase"]
    if working_phase is None:
        working_phase = slope_phase_rad(options["slope"])
    chain = Chain(bench, working_phase)
    expectation = expect_of(
        chain,
        stage,
        value,
        frequency_hz=options["frequency"],
        duration_s=options["duration"],
        wanted_snr=options["snr"],
        direction=_direction(options),
        lines=options["lines"],
        background_rad=options["background"],
    )
    document = to_json(expectation.to_dict())
    _write_files(chain, document, options)
    click.echo(document if options["as_json"] else expectation_page(expectation))


def _check_files(bench: Bench, options: dict[str, Any]) -> None:
    from metro.figure_file import check_figure
    from metro.whole_file import check_document

    if options["out"]:
        check_document(options["out"], options["overwrite"], [bench.path])
    if options["plot"]:
        check_figure(options["plot"], options["overwrite"], [bench.path])


def _write_files(chain: Chain, document: str, options: dict[str, Any]) -> None:
    from metro.whole_file import write_whole

    if options["plot"]:
        from metro.figure_file import save_figure
        from metro.noise_plot import noise_figure

        save_figure(noise_figure(chain), options["plot"], overwrite=options["overwrite"])
    if options["out"]:
        write_whole(options["out"], document + "\n", overwrite=options["overwrite"])


def _one_stage(options: dict[str, Any]) -> tuple[str, str]:
    given = [name for name in (*_GIVEN, "length_strain") if options[name] is not None]
    if len(given) != 1:
        names = ", ".join(f"--{name}" for name in _GIVEN)
        got = " and ".join(f"--{name.replace('_', '-')}" for name in given) or "none"
        raise MetroError(f"exactly one of {names} must be given, got {got}")
    return given[0], options[given[0]]


def _one_arm_m(bench: Bench, text: str) -> float:
    """Return the displacement that a length strain of the x arm alone makes."""
    from metro.kernel.strain import length_change_m
    from metro.units import si

    return length_change_m(si(text, "--length-strain", "1"), bench.magnitude("arms.length"))


def _direction(options: dict[str, Any]) -> Any:  # noqa: ANN401  # a Direction or None
    from metro.corrections import Direction

    angles = [options[name] for name in ("theta", "phi", "psi")]
    return None if angles == [None, None, None] else Direction(*(angle or 0.0 for angle in angles))
