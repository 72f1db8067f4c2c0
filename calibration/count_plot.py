"""The picture of a counted scan: the record, the fringes gone through, the fringe law."""

from pathlib import Path
from typing import TYPE_CHECKING

import numpy as np

from calibration.fringe_axes import (
    GREY,
    ORANGE,
    above,
    draw_departure,
    draw_law,
    draw_record,
    unit_label,
)
from metro.extras import require
from metro.figure_file import save_figure

if TYPE_CHECKING:
    from matplotlib.axes import Axes

    from calibration.count_reading import CountReading

__all__ = ["save_count_plot"]


def save_count_plot(result: "CountReading", path: str | Path, *, overwrite: bool) -> None:
    """Draw a counted scan: record, fringes against time, fringe law with residuals.

    Parameters
    ----------
    result : CountReading
        Passes and phase.
    path : str or Path
        PNG, PDF or SVG by its suffix.
    overwrite : bool
        Whether an existing file may be replaced.

    Notes
    -----
    The phase is the one that the level itself tells, carried on over the extremes: what is left is noise
    and what lies beyond the extremes. Whether the law is a cosine is told by the harmonics, which were
    found against smooth motions.
    """
    figures = require("matplotlib.figure", "bench", "a plot")
    figure = figures.Figure(figsize=(8.27, 10.5), layout="constrained")
    axes = figure.subplots(4, 1, height_ratios=[3, 2, 3, 2])
    extremes = float(result.low.magnitude), float(result.high.magnitude)
    _draw_scan(axes[0], result, extremes)
    _draw_course(axes[1], result)
    axes[0].sharex(axes[1])
    unit = unit_label(result.trace.unit)
    draw_law(axes[2], axes[3], result.count.phase_rad, result.trace.values, extremes, unit)
    draw_departure(axes[3], result.shape.directions if result.shape else [], extremes)
    save_figure(figure, path, overwrite=overwrite)


def _draw_scan(axes: "Axes", result: "CountReading", extremes: tuple[float, float]) -> None:
    draw_record(axes, result.trace.times_s(), result.trace.values)
    for level, style, name in zip(extremes, (":", "--"), ("low", "high"), strict=True):
        axes.axhline(level, color=ORANGE, linewidth=1.0, linestyle=style, label=name)
    axes.set_title(_heading(result), loc="left")
    axes.set(ylabel=f"photodiode / {unit_label(result.trace.unit)}")
    above(axes)


def _draw_course(axes: "Axes", result: "CountReading") -> None:
    time, count = result.trace.times_s(), result.count
    draw_record(axes, time, count.phase_rad / (2.0 * np.pi))
    for one in count.passes[1:]:
        axes.axvline(time[one.start_index], color=GREY, linewidth=0.6, linestyle=":")
    axes.set(xlabel="time / s", ylabel="phase / fringes")


def _heading(result: "CountReading") -> str:
    passes = len(result.count.passes)
    many = "es" if passes > 1 else ""
    doubt = "; not to be trusted" if result.reasons else ""
    return f"Scan: {result.fringes} fringes in {passes} pass{many}{doubt}"
