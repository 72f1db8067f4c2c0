"""One page about a calibrated session: fringe, spectrum, actuator, and truth where it is known."""

from collections.abc import Callable, Mapping, Sequence
from dataclasses import dataclass
from pathlib import Path
from typing import TYPE_CHECKING, Any

import numpy as np
from numpy.typing import NDArray

from calibration.comparison import Comparison
from calibration.convert import ConvertedRecording
from calibration.record import Calibration
from calibration.response_plot import draw_residuals, draw_response
from calibration.session import photodiode_name
from firmware_bridge.opening import open_recording
from firmware_bridge.trace import Trace
from metro.extras import require
from metro.figure_file import save_figure

if TYPE_CHECKING:
    from matplotlib.axes import Axes

__all__ = [
    "Shown",
    "draw_actuator",
    "draw_scan",
    "draw_spectrum",
    "response_figure",
    "save_session_page",
]

FloatArray = NDArray[np.float64]

# Blue, orange and grey of the Okabe-Ito set: told apart by colour-blind readers and in print.
BLUE, ORANGE, GREY = "#0072b2", "#d55e00", "#777777"
SEGMENT_S = 4.0  # of the spectrum, where the recording is that long


@dataclass(frozen=True, eq=False)
class Shown:
    """The recordings that a page shows.

    Parameters
    ----------
    scan : Trace
        Photodiode samples [V] of a scan; None without one.
    moved : Trace
        Displacement [m] of a lines recording on a slope; None without one.
    """

    scan: Trace | None
    moved: Trace | None

    @classmethod
    def of_files(cls, calibration: Calibration, roles: Mapping[str, Sequence[str]]) -> "Shown":
        """Return the first scan and the first lines recording of a session's files by role."""
        by_role = {role.replace("_", "-"): paths for role, paths in roles.items()}
        scans = by_role.get("scan", ())
        slope = "rising" if by_role.get("lines-rising") else "falling"
        lines, moved = by_role.get(f"lines-{slope}", ()), None
        if lines:
            source = open_recording(lines[0])
            name = photodiode_name(source)
            converted = ConvertedRecording(source, name, calibration, "displacement", slope)
            moved = converted.trace("displacement")
        scan = open_recording(scans[0]) if scans else None
        return cls(
            scan=None if scan is None else scan.trace(photodiode_name(scan)),
            moved=moved,
        )


def save_session_page(
    calibration: Calibration,
    shown: Shown,
    comparisons: Sequence[Comparison],
    title: str,
    path: str | Path,
    *,
    overwrite: bool,
) -> None:
    """Draw one page about a session into a file.

    Parameters
    ----------
    calibration : Calibration
        The result.
    shown : Shown
        The recordings to draw.
    comparisons : sequence of Comparison
        Measured beside truth; empty for a real bench.
    title : str
        Heading of the page.
    path : str or Path
        PNG, PDF or SVG by its suffix.
    overwrite : bool
        Whether an existing file may be replaced.
    """
    figures = require("matplotlib.figure", "bench", "a plot")
    scan, moved, response = shown.scan, shown.moved, calibration.response
    panels: list[Callable[[Axes], None]] = []
    if scan is not None:
        panels.append(lambda axes: draw_scan(axes, calibration, scan.values, scan.rate_hz))
    if moved is not None:
        panels.append(lambda axes: draw_spectrum(axes, calibration, moved.values, moved.rate_hz))
    panels.append(lambda axes: draw_actuator(axes, calibration))
    if response is not None:
        panels.append(lambda axes: draw_residuals(axes, calibration.actuator, response))
    if comparisons:
        panels.append(lambda axes: _draw_comparison(axes, comparisons))
    figure = figures.Figure(figsize=(8.27, 11.69 * len(panels) / 4), layout="constrained")
    figure.suptitle(title, fontsize=12)
    for draw, axes in zip(panels, figure.subplots(len(panels), 1), strict=True):
        draw(axes)
    save_figure(figure, path, overwrite=overwrite)


def draw_scan(axes: "Axes", calibration: Calibration, volts: FloatArray, rate_hz: float) -> None:
    """Draw a scan in volts with the fitted extremes."""
    time_s = np.arange(volts.size) / rate_hz
    extremes = calibration.extremes
    axes.plot(time_s, volts, color=BLUE, linewidth=0.8, label="photodiode", rasterized=True)
    axes.margins(x=0.0)
    for level_v, name, offset in ((extremes.high_v, "high", 3), (extremes.low_v, "low", -3)):
        axes.axhline(level_v, color=ORANGE, linewidth=1.0, linestyle="--")
        axes.annotate(
            f"{name} {level_v:.4f} V",
            (1.0, level_v),
            xycoords=("axes fraction", "data"),
            xytext=(-4, offset),
            textcoords="offset points",
            ha="right",
            va="bottom" if offset > 0 else "top",
            color=ORANGE,
            fontsize=8,
        )
    axes.axhline(extremes.mid_v, color=GREY, linewidth=0.8, linestyle=":")
    axes.set(
        title="Fringe: scan and its fitted extremes",
        xlabel="time / s",
        ylabel="photodiode / V",
        ylim=(extremes.low_v - 0.25 * extremes.swing_v, extremes.high_v + 0.25 * extremes.swing_v),
    )


def draw_spectrum(
    axes: "Axes", calibration: Calibration, displacement_m: FloatArray, rate_hz: float
) -> None:
    """Draw the amplitude spectral density of a displacement, the lines marked."""
    signal = require("scipy.signal", "bench", "a spectrum")
    filled = np.where(np.isfinite(displacement_m), displacement_m, np.nanmean(displacement_m))
    length = min(filled.size, int(SEGMENT_S * rate_hz))
    frequency_hz, density = signal.welch(filled, rate_hz, window="hann", nperseg=length)
    axes.loglog(frequency_hz[2:], np.sqrt(density[2:]) * 1e12, color=BLUE, linewidth=0.7)
    for entry in calibration.actuator:
        at_hz = float(entry.frequency.magnitude)
        axes.axvline(at_hz, color=ORANGE, linewidth=0.8, linestyle="--")
        axes.annotate(
            f"{at_hz:g} Hz",
            (at_hz, 1.0),
            xycoords=("data", "axes fraction"),
            xytext=(2, -3),
            textcoords="offset points",
            rotation=90,
            va="top",
            fontsize=8,
            color=ORANGE,
        )
    axes.set(
        title=f"Spectrum of the converted lines recording (Hann, {length / rate_hz:.3g} s)",
        xlabel="frequency / Hz",
        ylabel="displacement / (pm/√Hz)",
        xlim=(0.5, rate_hz / 2),
    )
    axes.grid(which="both", linewidth=0.3, alpha=0.6)


def response_figure(calibration: Calibration) -> Any:  # noqa: ANN401  # matplotlib's Figure
    """Return the actuator's response alone as a figure."""
    figures = require("matplotlib.figure", "bench", "a plot")
    figure = figures.Figure(figsize=(7.4, 2.8), layout="constrained")
    draw_actuator(figure.add_subplot(), calibration)
    return figure


def draw_actuator(axes: "Axes", calibration: Calibration) -> None:
    """Draw magnitude and phase of the actuator at each line, with expanded uncertainties."""
    at_hz = [float(entry.frequency.magnitude) for entry in calibration.actuator]
    size = [float(entry.magnitude.magnitude) * 1e9 for entry in calibration.actuator]
    bars = [_expanded(entry.magnitude) * 1e9 for entry in calibration.actuator]
    axes.errorbar(at_hz, size, yerr=bars, fmt="o", color=BLUE, capsize=4, markersize=4)
    axes.set(
        title="Actuator response, with expanded uncertainty (95 %)",
        xlabel="frequency / Hz",
        ylabel="magnitude / (nm/V)",
        xlim=(0, 1.1 * max(at_hz)),
    )
    axes.grid(linewidth=0.3, alpha=0.6)
    turned = axes.twinx()
    phased = [(f, e.phase) for f, e in zip(at_hz, calibration.actuator, strict=True) if e.phase]
    phase = np.degrees([float(value.magnitude) for _, value in phased])
    turns = np.degrees([_expanded(value) for _, value in phased])
    turned.errorbar(
        [f for f, _ in phased], phase, yerr=turns, fmt="s", color=ORANGE, capsize=4, markersize=3
    )
    if calibration.response is not None:
        draw_response(axes, turned, calibration.response)
    turned.set_ylabel("phase / °", color=ORANGE)


def _draw_comparison(axes: "Axes", comparisons: Sequence[Comparison]) -> None:
    names = [comparison.name for comparison in comparisons]
    rows = np.arange(len(names))[::-1]
    factors = [c.measured.coverage_factor(0.95) for c in comparisons]
    errors = [c.normalised_error / k for c, k in zip(comparisons, factors, strict=True)]
    colours = [BLUE if c.inside_95 else ORANGE for c in comparisons]
    axes.axvspan(-1, 1, color=GREY, alpha=0.15, linewidth=0)
    axes.axvline(0, color=GREY, linewidth=0.8)
    axes.scatter(errors, rows, color=colours, zorder=3, s=18)
    axes.set_yticks(rows, names, fontsize=8)
    reach = max([1.6, *(1.1 * abs(error) for error in errors)])
    axes.set(
        title="Measured against truth: error over its expanded uncertainty (95 %)",
        xlabel="(measured − truth)/U; shaded: inside the interval",
        xlim=(-reach, reach),
    )


def _expanded(measured: Any) -> float:  # noqa: ANN401  # a Measured; its u is always known here
    return float(measured.coverage_factor(0.95) * measured.u_magnitude)
