"""The figures of a live page, empty: axes, colours and glyphs; the page fills their sources."""

from typing import Any

from metro.extras import require

__all__ = ["COLOURS", "figures_json"]

# The set of Okabe and Ito (2008), told apart by colour-blind readers; those that stand out on dark first.
COLOURS = ("#56b4e9", "#e69f00", "#009e73", "#f0e442", "#cc79a7", "#d55e00", "#bbbbbb", "#0072b2")
_SKY, _ORANGE, _GREEN, _YELLOW, _PURPLE, _VERMILION, _GREY, _BLUE = COLOURS
_INK, _DIM, _GRID, _GROUND = "#c9d1d9", "#8b949e", "#222a33", "#0d1117"
_TEXT_SIZE = "13px"


def figures_json() -> dict[str, Any]:
    """Return every figure of the page by the name of its place, in the form BokehJS embeds.

    Returns
    -------
    dict
        ``trace``, ``fringe``, ``spectrum``, ``amplitude``, ``relative`` and ``phase``.

    Raises
    ------
    MissingExtraError
        If Bokeh is not installed.
    """
    embed = require("bokeh.embed", "live", "watch")
    made = {
        "trace": _trace(),
        "fringe": _fringe(),
        "spectrum": _spectrum(),
        "amplitude": _course("amplitude", "amplitude / V", "log"),
        "relative": _course("change", "change / %", "linear"),
        "phase": _course("phase", "phase / °", "linear"),
    }
    return {name: embed.json_item(figure) for name, figure in made.items()}


def _source(name: str, *columns: str) -> Any:  # noqa: ANN401  # Bokeh's data source
    models = require("bokeh.models", "live", "watch")
    return models.ColumnDataSource({column: [] for column in columns}, name=name)


def _figure(name: str, x_label: str, y_label: str, **settings: Any) -> Any:  # noqa: ANN401  # Bokeh's figure
    plotting = require("bokeh.plotting", "live", "watch")
    figure = plotting.figure(
        name=name,
        x_axis_label=x_label,
        y_axis_label=y_label,
        sizing_mode="stretch_both",
        min_height=60,
        toolbar_location=None,
        tools="",
        output_backend="canvas",
        lod_threshold=None,
        background_fill_color=_GROUND,
        border_fill_color=_GROUND,
        outline_line_color=_GRID,
        min_border=4,
        **settings,
    )
    figure.grid.grid_line_color = _GRID
    for axis in figure.axis:
        axis.axis_label_text_font_style = "normal"
        axis.axis_label_text_font_size = axis.major_label_text_font_size = _TEXT_SIZE
        axis.axis_label_text_color = axis.major_label_text_color = _INK
        axis.axis_line_color = axis.major_tick_line_color = _DIM
        axis.minor_tick_line_color = None
        axis.axis_label_standoff = 2
    return figure


def _range(name: str, start: float, end: float) -> Any:  # noqa: ANN401  # Bokeh's range
    models = require("bokeh.models", "live", "watch")
    return models.Range1d(start, end, name=name)


def _trace() -> Any:  # noqa: ANN401  # Bokeh's figure
    figure = _figure(
        "trace",
        "time before now / s",
        "photodiode / V",
        x_range=_range("trace_x", -10.0, 0.0),
        y_range=_range("trace_y", -1.0, 1.0),
    )
    lost = _source("trace_lost", "left", "right")
    figure.vbar(
        x="left",
        width="right",
        top=1e6,
        bottom=-1e6,
        source=lost,
        fill_color=_VERMILION,
        fill_alpha=0.35,
        line_color=None,
        hatch_pattern="/",
        hatch_color=_VERMILION,
    )
    levels = _source("trace_levels", "y")
    figure.hspan(y="y", source=levels, line_color=_DIM, line_dash="dashed", line_width=1)
    source = _source("trace_data", "x", "low", "high", "middle")
    # Where a bin holds one sample, this line is the trace; else it lies within the envelope.
    figure.line("x", "middle", source=source, color=_SKY, line_width=1.5, line_join="round")
    figure.segment(
        x0="x",
        x1="x",
        y0="low",
        y1="high",
        source=source,
        color=_SKY,
        line_width=2,
        line_cap="round",
    )
    return figure


def _fringe() -> Any:  # noqa: ANN401  # Bokeh's figure
    models = require("bokeh.models", "live", "watch")
    figure = _figure(
        "fringe",
        "phase / ° (0 at the top, ±90 mid-fringe)",
        "photodiode / V",
        x_range=_range("fringe_x", -180.0, 180.0),
        y_range=_range("fringe_y", -1.0, 1.0),
    )
    figure.xaxis.ticker = models.FixedTicker(ticks=[-180, -90, 0, 90, 180])
    figure.line("x", "y", source=_source("fringe_curve", "x", "y"), color=_DIM, line_width=2)
    reach = _source("fringe_reach", "x", "y")
    figure.line("x", "y", source=reach, color=_SKY, line_width=7, line_cap="round", line_alpha=0.8)
    mirror = _source("fringe_mirror", "x", "y")
    figure.scatter("x", "y", source=mirror, size=16, line_color=_DIM, line_width=2, fill_color=None)
    point = _source("fringe_point", "x", "y")
    figure.scatter(
        "x", "y", source=point, size=22, line_color="#ffffff", line_width=2, fill_color=_ORANGE
    )
    return figure


def _spectrum() -> Any:  # noqa: ANN401  # Bokeh's figure
    figure = _figure(
        "spectrum",
        "frequency / Hz",
        "density / (V/√Hz)",
        x_axis_type="log",
        y_axis_type="log",
        x_range=_range("spectrum_x", 1.0, 2000.0),
        y_range=_range("spectrum_y", 1e-7, 1.0),
    )
    lines = _source("spectrum_lines", "x", "label", "colour", "y")
    figure.vspan(x="x", source=lines, line_color="colour", line_dash="dotted", line_width=2)
    data = _source("spectrum_data", "x", "mean", "highest", "expected")
    figure.line("x", "highest", source=data, color=_SKY, line_alpha=0.45, line_width=1)
    figure.line("x", "mean", source=data, color=_SKY, line_width=2, legend_label="measured")
    figure.line(
        "x",
        "expected",
        source=data,
        color=_ORANGE,
        line_width=2.5,
        line_dash="dashed",
        legend_label="expected of this bench",
    )
    figure.text(
        x="x",
        y="y",
        text="label",
        source=lines,
        text_color="colour",
        text_font_size=_TEXT_SIZE,
        angle=1.5708,
        text_align="right",
        text_baseline="bottom",
        x_offset=-5,
    )
    legend = figure.legend[0]
    legend.location = "bottom_left"
    legend.items[1].name = "spectrum_expected"
    legend.background_fill_color, legend.background_fill_alpha = _GROUND, 0.7
    legend.border_line_color = None
    legend.label_text_color, legend.label_text_font_size = _INK, _TEXT_SIZE
    legend.padding = legend.margin = 4
    return figure


def _course(name: str, label: str, scale: str) -> Any:  # noqa: ANN401  # Bokeh's figure
    """Return the course of all lines over the last minutes, with error bars."""
    figure = _figure(
        name,
        "time before now / min",
        label,
        y_axis_type=scale,
        x_range=_range(f"{name}_x", -5.0, 0.0),
        y_range=_range(f"{name}_y", 1e-3, 1.0),
    )
    source = _source(f"{name}_data", "x", "y", "low", "high", "colour", "marker")
    figure.segment(x0="x", x1="x", y0="low", y1="high", source=source, color="colour", line_width=2)
    figure.scatter("x", "y", source=source, size=7, color="colour", marker="marker")
    return figure
