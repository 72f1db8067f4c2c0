"""A recording at a glance: every channel's envelope, what is missing, and the board's clock."""

from __future__ import annotations

from typing import TYPE_CHECKING, Any

import numpy as np

from firmware_bridge.mask_runs import mask_runs
from firmware_bridge.overview import overview_of
from metro.extras import require

if TYPE_CHECKING:
    from numpy.typing import NDArray

    from firmware_bridge.inspection import Inspection
    from firmware_bridge.overview import Overview
    from firmware_bridge.trace import Recording

__all__ = ["inspection_figure"]

# Blue, vermilion and grey of the Okabe-Ito set, told apart by colour-blind readers and in print.
_BLUE, _VERMILION, _GREY = "#0072b2", "#d55e00", "#777777"
_FAINTEST = 0.25  # one value missing among thousands must still be seen
_MOST_CHANNELS = 8  # a page holds no more; the rest is named


def inspection_figure(recording: Recording, found: Inspection) -> Any:  # noqa: ANN401  # a Figure
    """Return the picture of an inspected recording.

    Parameters
    ----------
    recording : Recording
        Read once more, in bounded memory.
    found : Inspection
        Its verdict.

    Returns
    -------
    matplotlib.figure.Figure
        One panel a channel, and the clock's course where host stamps were kept.

    Raises
    ------
    MissingExtraError
        If matplotlib is not installed.
    """
    figures = require("matplotlib.figure", "bench", "--plot")
    shown = min(len(recording.channels), _MOST_CHANNELS)
    panels = shown + (found.course is not None)
    figure = figures.Figure(figsize=(8.3, 1.2 + 2.0 * panels), layout="constrained")
    verdict = "no reason for distrust found" if found.is_sound else "; ".join(found.reasons)
    figure.suptitle(_wrapped(f"{recording.path}: {verdict}"), fontsize=10)
    axes = figure.subplots(panels, 1, squeeze=False)[:, 0]
    overview = overview_of(recording)
    for number in range(shown):
        _draw_channel(axes[number], recording, overview, number)
    axes[shown - 1].set_xlabel("time / s")
    if found.course is not None:
        _draw_clock(axes[-1], *found.course)
    return figure


def _draw_channel(axes: Any, recording: Recording, overview: Overview, number: int) -> None:  # noqa: ANN401
    channel, edges = recording.channels[number], overview.edges_s
    low, high = overview.low[number], overview.high[number]
    axes.fill_between(
        edges[:-1], low, high, step="post", color=_BLUE, alpha=0.35, linewidth=0, label="envelope"
    )
    axes.step(edges[:-1], low, where="post", color=_BLUE, linewidth=0.7)
    axes.step(edges[:-1], high, where="post", color=_BLUE, linewidth=0.7)
    _mark_missing(axes, overview, number)
    lost = int(overview.missing[number].sum())
    unit = "counts" if channel.unit == "1" else channel.unit
    axes.set(ylabel=f"{channel.name} / {unit}", xlim=(0, edges[-1]))
    axes.set_title(
        f"{lost} values missing or over-range (marked)" if lost else "complete",
        fontsize=8,
        loc="right",
        color=_VERMILION if lost else _GREY,
    )
    axes.grid(linewidth=0.3, alpha=0.6)


def _mark_missing(axes: Any, overview: Overview, number: int) -> None:  # noqa: ANN401
    """Shade what is wholly missing; a strip along the top shows how much of each column is."""
    missing, edges = overview.missing[number], overview.edges_s
    if not missing.any():
        return
    axes.set_ylim(axes.get_ylim())  # kept: the strip has coordinates of its own
    share = missing / overview.samples
    for start, stop in mask_runs(share == 1.0):
        axes.axvspan(edges[start], edges[stop], color=_VERMILION, alpha=0.25, linewidth=0)
    strip = np.where(share > 0, np.maximum(share, _FAINTEST), 0.0)
    axes.pcolormesh(
        edges,
        [0.95, 1.0],
        strip[None, :],
        transform=axes.get_xaxis_transform(),
        cmap="Oranges",
        vmin=0.0,
        vmax=1.0,
    )


def _draw_clock(axes: Any, host_s: NDArray[np.float64], board_s: NDArray[np.float64]) -> None:  # noqa: ANN401
    axes.plot(host_s, 1e3 * (board_s - host_s), ".", color=_BLUE, markersize=3)
    axes.set(xlabel="host's time / s", ylabel="board − host / ms")
    axes.set_title("the board's clock against the host's", fontsize=8, loc="right", color=_GREY)
    axes.grid(linewidth=0.3, alpha=0.6)


def _wrapped(text: str) -> str:
    from textwrap import wrap

    return "\n".join(wrap(text, 100)[:4])
