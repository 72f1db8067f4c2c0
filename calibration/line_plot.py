"""Fitted lines, drawn: the noise beside each, and amplitude and phase through the recording."""

from typing import TYPE_CHECKING, Any

import numpy as np

from metro.extras import require

if TYPE_CHECKING:
    from matplotlib.axes import Axes

    from calibration.line_fit import Line, LineFit

__all__ = ["lines_figure"]

_MOST_LINES = 10
_ROW_INCHES = 2.2


def lines_figure(fit: "LineFit", title: str) -> Any:  # noqa: ANN401  # matplotlib's Figure
    """Return a figure with a row for each line.

    Parameters
    ----------
    fit : LineFit
        Up to ten lines are drawn.
    title : str
        What was recorded.

    Returns
    -------
    matplotlib.figure.Figure
        Left what the fit left over beside the line, then its amplitude and phase over time, with
        bars of one standard uncertainty.

    Raises
    ------
    MissingExtraError
        If matplotlib is not installed.
    """
    figures = require("matplotlib.figure", "bench", "--plot")
    lines = fit.lines[:_MOST_LINES]
    figure = figures.Figure(figsize=(11.0, 1.0 + _ROW_INCHES * len(lines)), layout="constrained")
    panels = figure.subplots(len(lines), 3, squeeze=False)
    for row, line in zip(panels, lines, strict=True):
        _draw_beside(row[0], line)
        _draw_course(row[1], row[2], line)
    for axes, label in zip(
        panels[-1], ("frequency from the line [Hz]", "time [s]", "time [s]"), strict=True
    ):
        axes.set_xlabel(label)
    left_out = len(fit.lines) - len(lines)
    figure.suptitle(
        title + (f" ({left_out} more lines not drawn)" if left_out else ""), fontsize=11
    )
    handles, labels = panels[0, 0].get_legend_handles_labels()
    figure.legend(handles, labels, loc="outside lower center", ncols=len(labels), fontsize="small")
    return figure


def _draw_beside(axes: "Axes", line: "Line") -> None:
    beside, unit = line.beside, "" if line.response.unit == "1" else line.response.unit
    axes.set_ylabel(f"{line.frequency_hz:.6g} Hz\n[{unit or '1'}/√Hz]")
    if beside is None:
        return
    centre = 0.5 * float(beside.frequency_hz[0] + beside.frequency_hz[-1])
    away = beside.frequency_hz - centre
    shown = np.maximum(beside.density, np.finfo(float).tiny)
    axes.plot(
        away[beside.used],
        shown[beside.used],
        ".",
        color="tab:blue",
        label="left over beside the line",
    )
    axes.plot(
        away[~beside.used], shown[~beside.used], "x", color="tab:gray", markersize=4,
        label="not counted: farther out, a tone, another line",
    )  # fmt: skip
    axes.axhline(line.density_value, color="black", linewidth=1.2, label="noise beside the line")
    # A line of amplitude A has the power of a density A·√(T/2) in a bin of 1/T.
    height = abs(line.phasor) * np.sqrt(0.5 * line.used_s)
    axes.plot(0.0, height, "v", color="tab:red", label="the line in a bin of 1/T")
    if line.density_value > 0:
        axes.set_yscale("log")
    axes.grid(visible=True, alpha=0.3)


def _draw_course(amplitude: "Axes", phase: "Axes", line: "Line") -> None:
    course, unit = line.course, line.response.unit
    amplitude.set_ylabel(f"amplitude [{unit}]")
    phase.set_ylabel("phase [rad]")
    for axes in (amplitude, phase):
        axes.grid(visible=True, alpha=0.3)
    if course is None:
        amplitude.set_title("too short for bins of time", fontsize="small")
        return
    style: dict[str, Any] = {"fmt": ".", "color": "tab:blue", "capsize": 2, "linewidth": 1.0}
    amplitude.errorbar(course.time_s, course.amplitude, course.amplitude_u, **style)
    phase.errorbar(course.time_s, course.phase_rad, course.phase_u_rad, **style)
    amplitude.axhline(abs(line.phasor), color="black", linewidth=1.0)
    middle = float(np.angle(line.phasor))
    turns = np.round((float(np.mean(course.phase_rad)) - middle) / (2 * np.pi))
    phase.axhline(middle + 2 * np.pi * turns, color="black", linewidth=1.0)
