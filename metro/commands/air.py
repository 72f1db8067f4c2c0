"""``midfringe air``: the refractive index of air, its uncertainty and its sensitivities."""

from __future__ import annotations

from typing import TYPE_CHECKING, Any

import click

from metro.errors import MetroError
from metro.options import ValueType, bench_options, command, output_options

if TYPE_CHECKING:
    from metro.air_index import AirResult
    from metro.bench import Bench
    from metro.measured import Measured

__all__ = ["air"]

# option: kind of humidity, unit
_HUMIDITIES = {
    "dew_point": ("dew point", "K"),
    "vapour_pressure": ("vapour pressure", "Pa"),
    "mole_fraction": ("mole fraction", "1"),
}
_KEYS = {
    "temperature": "air.temperature",
    "pressure": "air.pressure",
    "wavelength": "laser.wavelength",
}


@command(
    'midfringe air --temperature 20degC --pressure 101325Pa --humidity 50% --wavelength "632.9908 nm"'
)
@click.option(
    "--dew-point", type=ValueType("K"), help="Dew point, such as 9degC, instead of --humidity."
)
@click.option("--vapour-pressure", type=ValueType("Pa"), help="Vapour pressure, such as 1200Pa.")
@click.option(
    "--mole-fraction", type=ValueType("1"), help="Mole fraction of water vapour, such as 0.0116."
)
@click.option(
    "--co2",
    type=ValueType("1", minimum=0.0, maximum=2e-3),
    help="Carbon dioxide; 450 umol/mol if not given.",
)
@click.option(
    "--equation",
    type=click.Choice(["ciddor", "edlen", "edlen1994"]),
    help="ciddor (default), edlen (water term as NIST uses it), edlen1994 (as printed).",
)
@bench_options
@output_options("out", "json", "overwrite")
def air(bench: Bench, **options: Any) -> None:  # noqa: ANN401  # one option each
    """Tell the refractive index of air after Ciddor or Edlén, and what it depends on.

    Humidity is given in exactly one way; without any the air is dry. Standard uncertainties of the
    inputs come from the bench file.
    """
    from metro.air_index import solve_air
    from metro.output import check_document, to_json, write_whole

    if options["co2"] is not None:
        bench = bench.override({"air.co2": _plain(options["co2"], "1")})
    humidity, kind = _humidity(bench, options)
    result = solve_air(
        {
            **{name: _required(bench, name, key) for name, key in _KEYS.items()},
            "humidity": humidity,
            "co2": bench.get("air.co2") or _plain(450e-6, "1"),
        },
        options["equation"] or bench.text("air.equation") or "ciddor",
        kind,
    )
    if options["out"]:
        check_document(options["out"], options["overwrite"], [bench.path])
    document = to_json(result.to_dict())
    if options["out"]:
        write_whole(options["out"], document + "\n", overwrite=options["overwrite"])
    click.echo(document if options["as_json"] else _page(result))


def _required(bench: Bench, name: str, key: str) -> Measured:
    value = bench.get(key)
    if value is None:
        raise MetroError(f"--{name} must be given, directly or in the bench file as {key}")
    return value


def _humidity(bench: Bench, options: dict[str, Any]) -> tuple[Measured, str]:
    given = [name for name in _HUMIDITIES if options[name] is not None]
    asked = bench.source("air.humidity") == "option --humidity"
    if len(given) + asked > 1:
        names = [f"--{name.replace('_', '-')}" for name in given] + ["--humidity"] * asked
        raise MetroError(f"humidity must be given in one way, got {' and '.join(names)}")
    if given:
        kind, unit = _HUMIDITIES[given[0]]
        return _plain(options[given[0]], unit), kind
    return bench.get("air.humidity") or _plain(0.0, "1"), "relative"


def _plain(value: float, unit: str) -> Measured:
    from metro.measured import Measured

    return Measured.of(value, unit)


def _page(result: AirResult) -> str:
    """Return the tables for people."""
    from metro.display import show
    from metro.output import table

    rows = [
        ("refractive index", f"{result.index.magnitude:.10f}"),
        ("standard uncertainty u", f"{result.index.u_magnitude:.2g}"),
        ("wavelength in air", f"{1e9 * result.wavelength_in_air.magnitude:.7f} nm"),
        ("equation", f"{result.equation}: {result.reference}"),
    ]
    inputs = [
        (
            name,
            show(slope.magnitude, slope.unit),
            f"{result.contributions[name]:.2g}" if name in result.contributions else "no u given",
        )
        for name, slope in result.sensitivities.items()
    ]
    inputs.append(("equation itself", "", f"{result.equation_u:.2g}"))
    parts = [table(rows), table(inputs, ("input", "sensitivity of n", "u of n"))]
    if result.remarks:
        parts.append("\n".join(["remarks", *(f"  {remark}" for remark in result.remarks)]))
    return "\n\n".join(parts)
