"""The chart of a line drawn: results with limits and alarms, cumulative sums, Allan deviation."""

from datetime import UTC, datetime
from typing import TYPE_CHECKING, Any

import numpy as np

from calibration.desk.control_chart import FEWEST
from calibration.desk.line_chart import LineChart
from calibration.desk.utc import unix_of
from firmware_bridge.gap_reason import counted
from metro.extras import require

if TYPE_CHECKING:
    from collections.abc import Sequence

    from matplotlib.axes import Axes

__all__ = ["chart_figure"]

# Okabe and Ito's colours, told apart by colour-blind readers.
_BLUE, _ORANGE, _GREY, _GREEN = "#0072b2", "#d55e00", "#777777", "#009e73"
_HEIGHT, _FEW_HEIGHT, _FEW_IN_ROW = 3.6, 3.0, 4
_WIDTHS = (2.2, 1.5, 1.2)
_LEAST_S = 60.0
_MOST_BARS = 150  # results beyond which their error bars would be one blur


def chart_figure(charts: "Sequence[LineChart]") -> Any:  # noqa: ANN401  # matplotlib's Figure
    """Return a figure of the charts of some lines, a row of three pictures each.

    Lines with too few results for limits show the results alone, several in a row.

    Parameters
    ----------
    charts : sequence of LineChart
        At least one.

    Returns
    -------
    matplotlib.figure.Figure
        Results over time; with enough of them cumulative sums and Allan deviation.

    Raises
    ------
    MissingExtraError
        If matplotlib is not installed.
    """
    figures = require("matplotlib.figure", "bench", "--plot")
    few = [chart for chart in charts if len(chart.values) < FEWEST]
    many = [chart for chart in charts if len(chart.values) >= FEWEST]
    few_rows = -(-len(few) // _FEW_IN_ROW)
    height = _HEIGHT * len(many) + _FEW_HEIGHT * few_rows
    figure = figures.Figure(figsize=(13.0, max(height, _HEIGHT)), layout="constrained")
    parts = [part for part, rows in (("many", many), ("few", few)) if rows]
    sizes = {"many": _HEIGHT * len(many), "few": _FEW_HEIGHT * few_rows}
    grid = figure.add_gridspec(len(parts), 1, height_ratios=[sizes[part] for part in parts])
    for place, part in enumerate(parts):
        if part == "many":
            _draw_many(figure, grid[place].subgridspec(len(many), 3, width_ratios=_WIDTHS), many)
        else:
            _draw_few(figure, grid[place].subgridspec(few_rows, min(len(few), _FEW_IN_ROW)), few)
    return figure


def _draw_many(figure: Any, grid: Any, charts: "Sequence[LineChart]") -> None:  # noqa: ANN401  # matplotlib's
    for row, chart in enumerate(charts):
        _draw_results(figure.add_subplot(grid[row, 0]), chart)
        _draw_sums(figure.add_subplot(grid[row, 1]), chart)
        _draw_allan(figure.add_subplot(grid[row, 2]), chart)


def _draw_few(figure: Any, grid: Any, charts: "Sequence[LineChart]") -> None:  # noqa: ANN401  # matplotlib's
    """Draw the results alone; say what there will be from enough of them on."""
    for number, chart in enumerate(charts):
        axes = figure.add_subplot(grid[divmod(number, grid.ncols)])
        _draw_results(axes, chart)
        axes.margins(y=0.35)
    figure.supxlabel(
        f"limits, cumulative sums and Allan deviation are drawn from {FEWEST} results of a line on",
        fontsize="small",
        color=_GREY,
    )


def _draw_results(axes: "Axes", chart: LineChart) -> None:
    scale, unit = _scale(chart)
    moments = _dates(chart.time_s)
    bars = np.where(np.isfinite(chart.u), chart.u, 0.0) if len(moments) <= _MOST_BARS else None
    axes.errorbar(
        moments,  # type: ignore[arg-type]  # dates are as good as numbers
        chart.values * scale,
        None if bars is None else bars * scale,
        fmt=".",
        color=_BLUE,
        markersize=3.5,
        elinewidth=0.8,
        label="result, bar u" if bars is not None else "result",
    )
    limits = chart.limits
    if limits is not None and limits.sample == 1:
        axes.axhline(limits.centre * scale, color=_GREY, linewidth=1.0, label="mean at first")
        for level in (limits.low, limits.high):
            axes.axhline(level * scale, color=_GREY, linewidth=1.0, linestyle="--")
        axes.plot([], [], color=_GREY, linewidth=1.0, linestyle="--", label="3σ limits")
    _mark_alarms(axes, chart, label=True)
    corrected = ", at one temperature" if chart.law.is_used else ""
    axes.set_title(f"{chart.line_hz:.6g} Hz: {counted(len(chart.values), 'result')}{corrected}")
    axes.set_ylabel(f"response over drive [{unit}]" if unit else "response over drive")
    _time_axis(axes, chart.time_s)
    axes.legend(fontsize="x-small", loc="best", framealpha=0.9)


def _draw_sums(axes: "Axes", chart: LineChart) -> None:
    moments: Any = _dates(chart.time_s)
    axes.plot(moments, chart.sums[:, 0], color=_ORANGE, linewidth=1.2, label="upward")
    axes.plot(moments, -chart.sums[:, 1], color=_GREEN, linewidth=1.2, label="downward")
    for level in (chart.rule.h, -chart.rule.h):
        axes.axhline(level, color=_GREY, linestyle="--", linewidth=1.0)
    axes.axhline(0.0, color=_GREY, linewidth=0.6)
    _mark_alarms(axes, chart, label=False)
    axes.set_ylim(-1.3 * chart.rule.h, 1.3 * chart.rule.h)
    axes.set_ylabel("cumulative sum [standard deviations]")
    axes.set_title(f"alarm beyond ±{chart.rule.h:.3g}")
    _time_axis(axes, chart.time_s)
    axes.legend(fontsize="x-small", loc="best", framealpha=0.9)


def _draw_allan(axes: "Axes", chart: LineChart) -> None:
    axes.set_title("overlapping Allan deviation")
    axes.set_xlabel("averaging time [s]")
    if chart.allan is None or not np.all(chart.allan.deviation > 0):
        axes.text(0.5, 0.5, "too few results", transform=axes.transAxes, ha="center", color=_GREY)
        return
    allan, size = chart.allan, abs(float(chart.values.mean()))
    relative = allan.deviation / size
    axes.errorbar(
        allan.tau_s, relative, allan.u / size, fmt="o-", color=_BLUE, markersize=4, capsize=2,
        label="with u",
    )  # fmt: skip
    axes.plot(
        allan.tau_s,
        relative[0] * np.sqrt(allan.tau_s[0] / allan.tau_s),
        color=_GREY,
        linestyle=":",
        label="white noise",
    )
    axes.set(xscale="log", yscale="log")
    axes.set_ylabel("of the value")
    axes.grid(visible=True, which="both", alpha=0.25)
    axes.legend(fontsize="x-small")


def _mark_alarms(axes: "Axes", chart: LineChart, *, label: bool) -> None:
    for number, alarm in enumerate(chart.alarms):
        moment: Any = _dates(np.array([unix_of(alarm.time)]))[0]
        text = "alarm" if label and number == 0 else None
        axes.axvline(moment, color=_ORANGE, linewidth=1.6, alpha=1.0 if label else 0.4, label=text)


def _scale(chart: LineChart) -> tuple[float, str]:
    """Return the factor and unit in which the results read well."""
    size = float(np.abs(chart.values).max())
    if chart.unit == "1" or not size > 0:
        return 1.0, "" if chart.unit == "1" else chart.unit
    for exponent, prefix in ((0, ""), (-3, "m"), (-6, "µ"), (-9, "n"), (-12, "p")):
        if size >= 10.0**exponent:
            return 10.0**-exponent, prefix + chart.unit
    return 1e15, "f" + chart.unit


def _dates(time_s: Any) -> list[datetime]:  # noqa: ANN401  # ndarray
    return [datetime.fromtimestamp(float(t), UTC) for t in time_s]


def _limits(time_s: Any) -> list[datetime]:  # noqa: ANN401  # ndarray
    """Return the ends of the time axis: at least a minute, since one result alone has no span."""
    low, high = float(np.min(time_s)), float(np.max(time_s))
    margin_s = max(0.05 * (high - low), _LEAST_S / 2)
    return _dates([low - margin_s, high + margin_s])


def _time_axis(axes: "Axes", time_s: Any) -> None:  # noqa: ANN401  # ndarray
    from matplotlib.dates import AutoDateLocator, ConciseDateFormatter

    axes.set_xlim(*_limits(time_s))  # type: ignore[arg-type]  # dates are as good as numbers
    axes.set_xlabel("UTC")
    axes.grid(visible=True, alpha=0.25)
    if not np.ptp(time_s) > 0:  # one moment alone
        moment = _dates(time_s[:1])
        axes.set_xticks(moment, [f"{moment[0]:%Y-%m-%d %H:%M}"])  # type: ignore[arg-type]  # same
        return
    locator = AutoDateLocator(minticks=2, maxticks=6)  # type: ignore[no-untyped-call]  # matplotlib's own
    axes.xaxis.set_major_locator(locator)
    axes.xaxis.set_major_formatter(ConciseDateFormatter(locator))  # type: ignore[no-untyped-call]  # same
