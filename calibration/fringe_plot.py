"""The picture of a fringe: the record, the phase it went through, the fringe law with residuals."""

import math
from pathlib import Path
from typing import TYPE_CHECKING

import numpy as np
from numpy.typing import NDArray

from metro.extras import require
from metro.figure_file import save_figure

if TYPE_CHECKING:
    from matplotlib.axes import Axes

    from calibration.count_reading import CountReading
    from calibration.fringe_reading import FringeReading
    from calibration.quadrature_reading import QuadratureReading
    from firmware_bridge.trace import Trace

__all__ = ["save_count_plot", "save_driven_plot", "save_quadrature_plot"]

FloatArray = NDArray[np.float64]

# Blue, orange and grey of the Okabe-Ito set: told apart by colour-blind readers and in print.
BLUE, ORANGE, GREY = "#0072b2", "#d55e00", "#777777"
_MOST_POINTS = 6000


def _thin(count: int) -> slice:
    return slice(None, None, max(1, math.ceil(count / _MOST_POINTS)))


def _draw_law(
    law: "Axes",
    rest: "Axes",
    phase: FloatArray,
    values: FloatArray,
    low: float,
    high: float,
    unit: str,
) -> None:
    """Draw values against phase modulo 2π, and what a cosine leaves."""
    good = np.isfinite(phase) & np.isfinite(values)
    turned = np.mod(phase[good], 2.0 * np.pi)
    level = values[good]
    thin = _thin(len(level))
    law.plot(turned[thin], level[thin], ".", color=BLUE, markersize=1.5, label="record")
    grid = np.linspace(0.0, 2.0 * np.pi, 400)
    middle, half = (high + low) / 2.0, (high - low) / 2.0
    law.plot(grid, middle + half * np.cos(grid), color=ORANGE, linewidth=1.2, label="fringe law")
    law.set(title="Fringe law", ylabel=f"photodiode / {unit}")
    law.legend(loc="upper center", fontsize=8)
    error = level - middle - half * np.cos(turned)
    rest.axhline(0.0, color=GREY, linewidth=0.8)
    rest.plot(turned[thin], error[thin], ".", color=BLUE, markersize=1.5)
    rest.set(xlabel="phase, modulo 2π / rad", ylabel=f"residual / {unit}", xlim=(0, 2.0 * np.pi))


def _unit(unit: str) -> str:
    return unit if unit not in ("", "1") else "as recorded"


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
    """
    figures = require("matplotlib.figure", "bench", "a plot")
    figure = figures.Figure(figsize=(8.27, 10.5), layout="constrained")
    axes = figure.subplots(4, 1, height_ratios=[3, 2, 3, 1.5])
    trace, count = result.trace, result.count
    unit, time = _unit(trace.unit), trace.times_s()
    thin = _thin(len(time))
    axes[0].plot(time[thin], trace.values[thin], color=BLUE, linewidth=0.6)
    low, high = float(result.low.magnitude), float(result.high.magnitude)
    for level, name in ((high, "high"), (low, "low")):
        axes[0].axhline(level, color=ORANGE, linewidth=1.0, linestyle="--", label=name)
    axes[0].set(
        title=f"Scan: {count.fringes:.2f} fringes in {len(count.passes)} pass{'es' if len(count.passes) > 1 else ''}",
        ylabel=f"photodiode / {unit}",
    )
    axes[0].sharex(axes[1])
    axes[1].plot(time[thin], count.phase_rad[thin] / (2.0 * np.pi), color=BLUE, linewidth=0.8)
    for one in count.passes[1:]:
        axes[1].axvline(time[one.start_index], color=GREY, linewidth=0.6, linestyle=":")
    axes[1].set(xlabel="time / s", ylabel="phase / fringes")
    _draw_law(axes[2], axes[3], _smooth_phase(count.phase_rad), trace.values, low, high, unit)
    save_figure(figure, path, overwrite=overwrite)


def _smooth_phase(phase: FloatArray) -> FloatArray:
    """Return the phase as a smooth motion through its middles, where arccos does not bend it.

    The phase was found from the very levels; so that the law can be seen against it, it is taken only
    at mid-fringe and joined by a cubic between.
    """
    good = np.flatnonzero(np.isfinite(phase))
    near = np.abs(np.cos(phase[good])) < 0.15
    keys = good[near]
    if len(keys) < 8:
        return phase
    groups = np.flatnonzero(np.diff(keys) > 1)
    starts = np.concatenate([[0], groups + 1])
    stops = np.concatenate([groups + 1, [len(keys)]])
    places = np.array([keys[a:b].mean() for a, b in zip(starts, stops, strict=True)])
    levels = np.array([phase[keys[a:b]].mean() for a, b in zip(starts, stops, strict=True)])
    if len(places) < 4:
        return phase
    interpolate = require("scipy.interpolate", "bench", "a plot")
    smooth = interpolate.PchipInterpolator(places, levels, extrapolate=False)
    return np.asarray(smooth(np.arange(len(phase))))


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
    unit, time = _unit(trace.unit), trace.times_s()
    phase = _driven_phase(result, time)
    low, high = float(result.fit.low.magnitude), float(result.fit.high.magnitude)
    model = (high + low) / 2.0 + (high - low) / 2.0 * np.cos(phase)
    period = trace.rate_hz / min(result.frequencies_hz)
    shown = slice(0, min(len(time), max(round(6.0 * period), 50)))
    axes[0].plot(time[shown], trace.values[shown], ".", color=BLUE, markersize=2, label="record")
    axes[0].plot(time[shown], model[shown], color=ORANGE, linewidth=1.0, label="driven fringe")
    for level in (high, low):
        axes[0].axhline(level, color=GREY, linewidth=0.8, linestyle="--")
    axes[0].set(title="Driven fringe", xlabel="time / s", ylabel=f"photodiode / {unit}")
    axes[0].legend(loc="upper right", fontsize=8)
    _draw_law(axes[1], axes[2], phase, trace.values, low, high, unit)
    save_figure(figure, path, overwrite=overwrite)


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
    thin, unit = _thin(len(phase)), _unit(x.unit)
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
    axes[0].legend(loc="upper right", fontsize=8)
    axes[1].plot(x.times_s()[thin], phase[thin] / (2.0 * np.pi), color=BLUE, linewidth=0.8)
    axes[1].set(xlabel="time / s", ylabel="phase / fringes")
    size = np.hypot(*ellipse.corrected(x.values, y.values)) / ellipse.radius - 1.0
    axes[2].axhline(0.0, color=GREY, linewidth=0.8)
    axes[2].plot(np.mod(phase[thin], 2.0 * np.pi), size[thin], ".", color=BLUE, markersize=1.5)
    axes[2].set(xlabel="phase, modulo 2π / rad", ylabel="radius / mean − 1", xlim=(0, 2.0 * np.pi))
    save_figure(figure, path, overwrite=overwrite)
