"""A converted recording drawn: its envelope in time, gaps shaded, from one pass over it."""

from dataclasses import dataclass
from pathlib import Path

import numpy as np
from numpy.typing import NDArray

from firmware_bridge.trace import Recording
from metro.extras import require
from metro.figure_file import save_figure

__all__ = ["Course", "course_of", "save_course"]

FloatArray = NDArray[np.float64]

BINS = 1600  # about the pixels across the page
_BLOCK = 1 << 18
BLUE, GREY = "#0072b2", "#777777"
# displayed unit by quantity, and what one of it is in SI
SHOWN = {"m": ("nm", 1e-9), "rad": ("rad", 1.0), "1": ("strain", 1.0)}


@dataclass(frozen=True, eq=False)
class Course:
    """Least and largest value in equal stretches of a recording.

    Parameters
    ----------
    time_s : ndarray, shape (n,)
        Middles of the stretches [s].
    least, largest : ndarray, shape (n,)
        NaN where nothing is there.
    left_out : ndarray, shape (n,)
        Part of each stretch that is missing.
    """

    time_s: FloatArray
    least: FloatArray
    largest: FloatArray
    left_out: FloatArray


def course_of(
    recording: Recording, from_s: float | None = None, to_s: float | None = None
) -> Course:
    """Return the envelope of a recording's first channel.

    Parameters
    ----------
    recording : Recording
        Read block by block.
    from_s, to_s : float, optional
        The stretch [s].

    Returns
    -------
    Course
        Of at most 1600 stretches.
    """
    start, stop = recording.span(from_s, to_s)
    edges = np.unique(np.linspace(start, stop, min(BINS, stop - start) + 1).astype(np.int64))
    low, high = np.full(edges.size - 1, np.inf), np.full(edges.size - 1, -np.inf)
    there = np.zeros(edges.size - 1)
    for first in range(start, stop, _BLOCK):
        last = min(first + _BLOCK, stop)
        values = recording.read([0], first, last).values[:, 0]
        known = np.isfinite(values)
        place = np.searchsorted(edges, np.arange(first, last), side="right") - 1
        # each block's bins are runs: reduce from their first samples on
        bins, begin = np.unique(place, return_index=True)
        low[bins] = np.minimum(
            low[bins], np.minimum.reduceat(np.where(known, values, np.inf), begin)
        )
        high[bins] = np.maximum(
            high[bins], np.maximum.reduceat(np.where(known, values, -np.inf), begin)
        )
        there[bins] += np.add.reduceat(known.astype(np.float64), begin)
    empty = there == 0
    return Course(
        time_s=(edges[:-1] + edges[1:]) / 2 / recording.rate_hz,
        least=np.where(empty, np.nan, low),
        largest=np.where(empty, np.nan, high),
        left_out=1.0 - there / np.diff(edges),
    )


def save_course(
    recording: Recording,
    course: Course,
    u_text: str,
    path: str | Path,
    *,
    overwrite: bool,
) -> None:
    """Draw a converted recording's course into a file.

    Parameters
    ----------
    recording : Recording
        Names the quantity and its unit.
    course : Course
        From `course_of`.
    u_text : str
        Its uncertainty in words.
    path : str or Path
        PNG, PDF or SVG by its suffix.
    overwrite : bool
        Whether an existing file may be replaced.
    """
    figures = require("matplotlib.figure", "bench", "a plot")
    channel = recording.channels[0]
    unit, scale = SHOWN.get(channel.unit, (channel.unit, 1.0))
    figure = figures.Figure(figsize=(9.0, 4.5), layout="constrained")
    axes = figure.subplots()
    axes.fill_between(
        course.time_s, course.least / scale, course.largest / scale, color=BLUE, linewidth=0.6
    )
    if (course.left_out > 0).any():
        axes.fill_between(
            course.time_s,
            0.0,
            1.0,
            where=course.left_out > 0,
            transform=axes.get_xaxis_transform(),
            color=GREY,
            alpha=0.3,
            linewidth=0,
            label="samples left out",
        )
        axes.legend(loc="upper right", fontsize=8)
    name = channel.name if unit == "strain" else f"{channel.name} / {unit}"
    axes.set(xlabel="time / s", ylabel=name, title=f"{Path(recording.path).name}: {u_text}")
    axes.title.set_fontsize(9)
    axes.grid(linewidth=0.3, alpha=0.6)
    axes.margins(x=0.0)
    save_figure(figure, path, overwrite=overwrite)
