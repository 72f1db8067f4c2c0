"""The picture of two detectors in quadrature: their ellipse, the phase, what the ellipse leaves."""

from pathlib import Path
from typing import TYPE_CHECKING

import numpy as np

from calibration.fringe_axes import BLUE, GREY, ORANGE, draw_record, thinned, unit_label
from metro.extras import require
from metro.figure_file import save_figure

if TYPE_CHECKING:
    from calibration.quadrature_reading import QuadratureReading
    from firmware_bridge.trace import Trace

__all__ = ["save_quadrature_plot"]


def save_quadrature_plot(
    result: "QuadratureReading", x: "Trace", y: "Trace", path: str | Path, *, overwrite: bool
) -> None:
    """Draw two detectors in quadrature: their ellipse, the phase, what the ellipse leaves.

    Parameters
    ----------
    result : QuadratureReading
        Phase and ellipse.
    x, y : Trace
        The detectors.
    path : str or Path
        PNG, PDF or SVG by its suffix.
    overwrite : bool
        Whether an existing file may be replaced.
    """
    figures = require("matplotlib.figure", "bench", "a plot")
    figure = figures.Figure(figsize=(8.27, 10.5), layout="constrained")
    axes = figure.subplots(3, 1, height_ratios=[3, 2, 1.5])
    ellipse, phase = result.phase.ellipse, result.phase.phase_rad
    thin, unit = thinned(len(phase)), unit_label(x.unit)
    axes[0].plot(x.values[thin], y.values[thin], ".", color=BLUE, markersize=1.5, label="record")
    turn = np.linspace(0.0, 2.0 * np.pi, 400)
    axes[0].plot(
        ellipse.radius * np.cos(turn) + ellipse.offset_x,
        ellipse.radius * np.sin(turn - ellipse.angle_rad) / ellipse.gain_ratio + ellipse.offset_y,
        color=ORANGE,
        linewidth=1.0,
        label="ellipse",
    )
    axes[0].set(title="Quadrature", xlabel=f"{x.name} / {unit}", ylabel=f"{y.name} / {unit}")
    axes[0].set_aspect("equal")
    axes[0].legend(loc="upper left", bbox_to_anchor=(1.0, 1.0), fontsize=8, frameon=False)
    draw_record(axes[1], x.times_s(), phase / (2.0 * np.pi))
    axes[1].set(xlabel="time / s", ylabel="phase / fringes")
    size = np.hypot(*ellipse.corrected(x.values, y.values)) / ellipse.radius - 1.0
    axes[2].axhline(0.0, color=GREY, linewidth=0.8)
    axes[2].plot(np.mod(phase[thin], 2.0 * np.pi), size[thin], ".", color=BLUE, markersize=1.5)
    axes[2].set(xlabel="phase, modulo 2π / rad", ylabel="radius / mean − 1", xlim=(0, 2.0 * np.pi))
    save_figure(figure, path, overwrite=overwrite)
