"""The spectrum of a recording beside the noise its bench should have, drawn."""

from itertools import cycle
from typing import TYPE_CHECKING, Any

import numpy as np
from numpy.typing import NDArray

from metro.extras import require

if TYPE_CHECKING:
    from matplotlib.axes import Axes

    from calibration.spectrum import Spectrum

__all__ = ["spectrum_figure"]

_POINTS = 4000
_MARKED = 12
_APART = 0.06  # decades
_COLORS = (
    "tab:orange",
    "tab:green",
    "tab:purple",
    "tab:brown",
    "tab:olive",
    "tab:cyan",
    "tab:gray",
)
_SMALL_SOURCE = 0.03  # of the total everywhere: not worth a curve


def spectrum_figure(spectrum: "Spectrum", title: str, what: str) -> Any:  # noqa: ANN401  # matplotlib's Figure
    """Return a figure of a spectral density, log-log.

    Parameters
    ----------
    spectrum : Spectrum
        Measured, with what is expected where that is known.
    title : str
        What was recorded.
    what : str
        The quantity, such as ``"displacement"``.

    Returns
    -------
    matplotlib.figure.Figure
        Measured density, expected total and sources, the lines marked; the ratio below it.

    Raises
    ------
    MissingExtraError
        If matplotlib is not installed.
    """
    figures = require("matplotlib.figure", "bench", "--plot")
    expected = spectrum.expected
    figure = figures.Figure(figsize=(9.0, 5.2 if expected is None else 6.8), layout="constrained")
    rows = [1] if expected is None else [3, 1]
    panels = figure.subplots(len(rows), 1, sharex=True, height_ratios=rows, squeeze=False)[:, 0]
    _draw_density(panels[0], spectrum)
    unit = "" if spectrum.unit == "1" else spectrum.unit
    panels[0].set(ylabel=f"{what} density [{unit or '1'}/√Hz]", title=title)
    if expected is not None:
        _draw_ratio(panels[1], spectrum)
    panels[-1].set_xlabel("frequency [Hz]")
    for axes in panels:
        axes.set(xscale="log", yscale="log")
        axes.grid(visible=True, which="major", alpha=0.3)
        axes.grid(visible=True, which="minor", alpha=0.1)
    figure.legend(
        *panels[0].get_legend_handles_labels(), loc="outside right upper", fontsize="small",
        title=_window(spectrum), title_fontsize="small",
    )  # fmt: skip
    return figure


def _window(spectrum: "Spectrum") -> str:
    welch = spectrum.welch
    return (
        f"Welch, Hann window,\noverlap 50 %,\n{welch.segments} segments,\n"
        f"noise bandwidth\n{welch.noise_bandwidth_hz:.3g} Hz"
    )


def _draw_density(axes: "Axes", spectrum: "Spectrum") -> None:
    welch, expected = spectrum.welch, spectrum.expected
    frequency, density = _thinned(welch.frequency_hz[1:-1], welch.density[1:-1])
    axes.plot(frequency, density, color="tab:blue", linewidth=0.8, label="measured")
    if expected is not None:
        axes.plot(
            welch.frequency_hz[1:-1], expected.density[1:-1], color="black", linewidth=2.0,
            label="expected",
        )  # fmt: skip
        for (name, source), color in zip(expected.sources.items(), cycle(_COLORS), strict=False):
            if (source > _SMALL_SOURCE * expected.density).any():
                axes.plot(
                    welch.frequency_hz[1:-1], source[1:-1], linewidth=1.0, linestyle="--", color=color,
                    label=name.replace("_", " "),
                )  # fmt: skip
    low, high = _limits(spectrum)
    axes.set_ylim(low, high)
    marked: list[float] = []
    for line in spectrum.lines[:_MARKED]:
        top = float(np.interp(line.frequency_hz, welch.frequency_hz, welch.density))
        axes.plot(line.frequency_hz, top, "v", color="tab:red", markersize=4)
        # Marks that would run into each other: the stronger line has its name.
        if any(abs(np.log10(line.frequency_hz / other)) < _APART for other in marked):
            continue
        marked.append(line.frequency_hz)
        axes.annotate(
            f"{line.frequency_hz:.5g} Hz",
            (line.frequency_hz, min(top, high)),
            xytext=(0, 6), textcoords="offset points", rotation=90, fontsize=7,
            ha="center", va="bottom", color="tab:red",
        )  # fmt: skip


def _limits(spectrum: "Spectrum") -> tuple[float, float]:
    """Return limits that hold all curves and leave room for the marks above."""
    density = spectrum.welch.density[1:-1]
    curves = [density[density > 0]]
    if spectrum.expected is not None:
        curves.append(spectrum.expected.density[1:-1])
    values = np.concatenate(curves)
    if not len(values):
        return 0.1, 1.0
    low, high = float(values.min()), float(values.max())
    return 0.5 * low, high * (high / low) ** 0.25 * 2.0


def _draw_ratio(axes: "Axes", spectrum: "Spectrum") -> None:
    ratio = spectrum.ratio
    if ratio is None:
        return
    frequency, values = _thinned(spectrum.welch.frequency_hz[1:-1], ratio[1:-1])
    axes.plot(frequency, values, color="tab:blue", linewidth=0.8)
    axes.axhline(1.0, color="black", linewidth=1.5)
    axes.set_ylabel("measured/expected")


def _thinned(
    frequency: NDArray[np.float64], values: NDArray[np.float64]
) -> tuple[NDArray[np.float64], NDArray[np.float64]]:
    """Return a curve with the extremes of each stretch kept, so that no line is lost."""
    stride = -(-2 * len(values) // _POINTS)
    if stride < 4:
        return frequency, values
    # Low frequencies keep every point: on a logarithmic axis they are far apart.
    whole = len(values) // 16
    count = (len(values) - whole) // stride
    rows = values[whole : whole + count * stride].reshape(count, stride)
    starts = whole + stride * np.arange(count)
    pairs = np.sort(np.stack([rows.argmin(axis=1), rows.argmax(axis=1)]), axis=0)
    kept = np.concatenate([np.arange(whole), (starts + pairs).T.ravel()])
    return frequency[kept], values[kept]
