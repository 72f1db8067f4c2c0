"""A plan as a picture: the lines above their noise, and what each line's u consists of."""

from __future__ import annotations

from typing import TYPE_CHECKING, Any

from metro.extras import require

if TYPE_CHECKING:
    from matplotlib.figure import Figure

    from metro.bench import Bench
    from metro.plan import Plan

__all__ = ["plan_figure"]


def plan_figure(plan: Plan, bench: Bench) -> Figure:
    """Return the picture of a plan.

    Parameters
    ----------
    plan : Plan
        What to draw.
    bench : Bench
        For the noise between the lines.

    Returns
    -------
    Figure
        Lines and noise over frequency above, expected u against the wanted one below.

    Raises
    ------
    MissingExtraError
        If matplotlib is not installed.
    """
    figure = require("matplotlib.figure", "bench", "--plot").Figure(
        figsize=(9.5, 7.5), layout="constrained"
    )
    above, below = figure.subplots(2, 1, height_ratios=(3, 2))
    _draw_lines(above, plan, bench)
    _draw_shares(below, plan)
    return figure  # type: ignore[no-any-return]  # matplotlib comes as a module of unknown type


def _draw_lines(axes: Any, plan: Plan, bench: Bench) -> None:  # noqa: ANN401  # matplotlib's axes
    import numpy as np

    from metro.chain import Chain
    from metro.motion import line_noise

    frequencies = [line.frequency_hz for line in plan.lines]
    grid = np.geomspace(0.7 * min(frequencies), 1.4 * max(frequencies), 200)
    chain = Chain(bench)
    noises = [line_noise(chain, float(f)) for f in grid]
    root = plan.duration_s**-0.5
    readout = [1e9 * root * (noise.readout.total or np.nan) for noise in noises]
    total = [1e9 * root * (noise.total or np.nan) for noise in noises]
    axes.loglog(grid, total, color="0.3", label=f"noise in {plan.duration_s:g} s, √(S/T)")
    axes.loglog(grid, readout, color="0.3", linestyle=":", label="of it light and electronics")
    amplitudes = [1e9 * line.displacement_m for line in plan.lines]
    bottom = 0.5 * float(np.nanmin([*total, *readout]))
    axes.vlines(frequencies, bottom, amplitudes, color="tab:blue")
    axes.plot(frequencies, amplitudes, "o", color="tab:blue", label="lines")
    axes.set(
        xlabel="frequency [Hz]",
        ylabel="displacement amplitude [nm]",
        title=f"Plan for u = {100 * plan.wanted_u:.3g} %: {plan.duration_s:g} s on each slope",
    )
    axes.legend(loc="upper left", bbox_to_anchor=(1.01, 1.0), frameon=False)
    axes.grid(visible=True, which="both", alpha=0.3)


def _draw_shares(axes: Any, plan: Plan) -> None:  # noqa: ANN401  # matplotlib's axes
    places = range(len(plan.lines))
    floors = [100 * line.floor_u for line in plan.lines]
    expected = [100 * line.expected_u for line in plan.lines]
    axes.bar(places, expected, color="tab:blue", label="expected")
    axes.bar(places, floors, color="0.7", label="of it the floor")
    axes.axhline(100 * plan.wanted_u, color="tab:red", linestyle="--", label="wanted")
    axes.set_xticks(list(places), [f"{line.frequency_hz:g}" for line in plan.lines])
    axes.set(xlabel="line [Hz]", ylabel="relative standard uncertainty [%]")
    axes.legend(loc="upper left", bbox_to_anchor=(1.01, 1.0), frameon=False)
