"""The picture of a driven fringe: some periods of the record with the fit, and the fringe law."""

from pathlib import Path
from typing import TYPE_CHECKING

import numpy as np
from numpy.typing import NDArray

from calibration.fringe_axes import BLUE, GREY, ORANGE, above, draw_law, unit_label
from metro.extras import require
from metro.figure_file import save_figure

if TYPE_CHECKING:
    from calibration.fringe_reading import FringeReading
    from firmware_bridge.trace import Trace

__all__ = ["save_driven_plot"]

FloatArray = NDArray[np.float64]


def _driven_phase(result: "FringeReading", time: FloatArray) -> FloatArray:
    """Return the phase that a driven fringe's fit describes [rad]."""
    fit = result.fit
    course = fit.working_course_rad
    position = np.linspace(0.0, 1.0, len(time))
    phase = np.interp(position, np.linspace(0.0, 1.0, len(course)), course)
    stretch = 1.0 + (0.0 if fit.clock_offset is None else float(fit.clock_offset.magnitude))
    for hertz, depth, start in zip(
        result.frequencies_hz, fit.phase_amplitude, fit.phase, strict=True
    ):
        turned = 2.0 * np.pi * hertz * stretch * time + float(start.magnitude)
        phase = phase + float(depth.magnitude) * np.cos(turned)
    return np.asarray(phase)


def save_driven_plot(
    result: "FringeReading", trace: "Trace", path: str | Path, *, overwrite: bool
) -> None:
    """Draw a driven record with its fit, and the fringe law with residuals.

    Parameters
    ----------
    result : FringeReading
        Fit and routes.
    trace : Trace
        The record.
    path : str or Path
        PNG, PDF or SVG by its suffix.
    overwrite : bool
        Whether an existing file may be replaced.
    """
    figures = require("matplotlib.figure", "bench", "a plot")
    figure = figures.Figure(figsize=(8.27, 9.5), layout="constrained")
    axes = figure.subplots(3, 1, height_ratios=[3, 3, 1.5])
    unit, time = unit_label(trace.unit), trace.times_s()
    phase = _driven_phase(result, time)
    low, high = extremes = float(result.fit.low.magnitude), float(result.fit.high.magnitude)
    model = (high + low) / 2.0 + (high - low) / 2.0 * np.cos(phase)
    period = trace.rate_hz / min(result.frequencies_hz)
    shown = slice(0, min(len(time), max(round(6.0 * period), 50)))
    axes[0].plot(time[shown], trace.values[shown], ".", color=BLUE, markersize=2, label="record")
    axes[0].plot(time[shown], model[shown], color=ORANGE, linewidth=1.0, label="driven fringe")
    for level in (high, low):
        axes[0].axhline(level, color=GREY, linewidth=0.8, linestyle="--")
    axes[0].set_title("Driven fringe", loc="left")
    axes[0].set(xlabel="time / s", ylabel=f"photodiode / {unit}")
    above(axes[0])
    draw_law(axes[1], axes[2], phase, trace.values, extremes, unit)
    save_figure(figure, path, overwrite=overwrite)
