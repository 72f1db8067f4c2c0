"""Panels that pictures of fringes share: a record against time, the fringe law with residuals."""

import math
from collections.abc import Sequence
from typing import TYPE_CHECKING

import numpy as np
from numpy.typing import NDArray

if TYPE_CHECKING:
    from matplotlib.axes import Axes

    from calibration.fringe_shape import DirectionShape

__all__ = [
    "BLUE",
    "GREY",
    "ORANGE",
    "above",
    "draw_departure",
    "draw_law",
    "draw_record",
    "thinned",
    "unit_label",
]

FloatArray = NDArray[np.float64]

# Blue, orange and grey of the Okabe-Ito set, and two more: told apart by colour-blind readers and in print.
BLUE, ORANGE, GREY = "#0072b2", "#d55e00", "#777777"
_WAYS = {"up": "#009e73", "down": "#cc79a7", "unknown": "#009e73"}
_MOST_POINTS = 6000
_RANGE = 0.999  # of the residuals, that sets the scale; single ones may lie beyond
_TURN = np.linspace(0.0, 2.0 * np.pi, 400)


def thinned(count: int) -> slice:
    """Return every so manieth sample, so that a cloud has no more points than can be seen.

    Parameters
    ----------
    count : int
        Samples there are.

    Returns
    -------
    slice
        At most 6000 of them.
    """
    return slice(None, None, max(1, math.ceil(count / _MOST_POINTS)))


def unit_label(unit: str) -> str:
    """Return a unit as an axis names it.

    Parameters
    ----------
    unit : str
        The record's.

    Returns
    -------
    str
        "as recorded" where it is none.
    """
    return unit if unit not in ("", "1") else "as recorded"


def draw_record(axes: "Axes", time_s: FloatArray, values: FloatArray) -> None:
    """Draw a record against time; where a dot holds many samples, from their least to their greatest.

    Parameters
    ----------
    axes : Axes
        To draw in.
    time_s, values : ndarray, shape (n,)
        Leaving samples out instead would show slower fringes than there are.
    """
    size = math.ceil(2 * len(values) / _MOST_POINTS)
    if size > 2:
        rows = values[: len(values) // size * size].reshape(-1, size)
        ends = [np.where(np.isnan(rows), far, rows) for far in (np.inf, -np.inf)]
        pairs = np.sort(np.stack([ends[0].argmin(axis=1), ends[1].argmax(axis=1)]), axis=0)
        shown = (pairs + size * np.arange(len(rows))).T.ravel()  # as they follow each other
        time_s, values = time_s[shown], values[shown]
    axes.plot(time_s, values, color=BLUE, linewidth=0.6)


def draw_law(
    law: "Axes",
    rest: "Axes",
    phase_rad: FloatArray,
    values: FloatArray,
    extremes: tuple[float, float],
    unit: str,
) -> None:
    """Draw values against phase modulo 2π, and what a cosine between the extremes leaves.

    Parameters
    ----------
    law, rest : Axes
        For the values and for the residuals.
    phase_rad, values : ndarray, shape (n,)
        Phase [rad] and photodiode at each sample; NaN where missing.
    extremes : tuple of float
        (low, high).
    unit : str
        The photodiode's.
    """
    good = np.isfinite(phase_rad) & np.isfinite(values)
    turned, level = np.mod(phase_rad[good], 2.0 * np.pi), values[good]
    middle, half = (extremes[1] + extremes[0]) / 2.0, (extremes[1] - extremes[0]) / 2.0
    thin = thinned(len(level))
    law.plot(turned[thin], level[thin], ".", color=BLUE, markersize=1.5, label="record")
    law.plot(_TURN, middle + half * np.cos(_TURN), color=ORANGE, linewidth=1.0, label="fringe law")
    law.set_title("Fringe law", loc="left")
    law.set(ylabel=f"photodiode / {unit}", xlim=(0, 2.0 * np.pi))
    law.tick_params(labelbottom=False)
    above(law)
    error = level - middle - half * np.cos(turned)
    rest.axhline(0.0, color=GREY, linewidth=0.8)
    rest.plot(turned[thin], error[thin], ".", color=BLUE, markersize=1.5)
    if len(error):
        far = 1.3 * float(np.quantile(np.abs(error), _RANGE))
        rest.set_ylim(-far or None, far or None)
    rest.set(xlabel="phase, modulo 2π / rad", ylabel=f"residual / {unit}", xlim=(0, 2.0 * np.pi))


def draw_departure(
    rest: "Axes", directions: Sequence["DirectionShape"], extremes: tuple[float, float]
) -> None:
    """Draw how far the law is from a cosine, from its harmonics, with 95 % bands.

    Parameters
    ----------
    rest : Axes
        With the residuals.
    directions : sequence of DirectionShape
        Harmonics found against smooth motions, so that they do not rest on the phase shown.
    extremes : tuple of float
        (low, high).
    """
    half = (extremes[1] - extremes[0]) / 2.0
    reach = max(abs(edge) for edge in rest.get_ylim())
    for one in directions:
        way = -1.0 if one.direction == "down" else 1.0  # the lean is given for φ growing in time
        waves = np.stack([np.cos(2.0 * _TURN), np.cos(3.0 * _TURN), way * np.sin(2.0 * _TURN)])
        middle = half * np.array([one.second, one.third, one.lean]) @ waves
        u = half * np.sqrt(np.array([one.second_u, one.third_u, one.lean_u]) ** 2 @ waves**2)
        color, name = _WAYS[one.direction], f"harmonics of the law, going {one.direction}"
        name = "harmonics of the law" if one.direction == "unknown" else name
        rest.fill_between(_TURN, middle - 2.0 * u, middle + 2.0 * u, color=color, alpha=0.2, lw=0)
        rest.plot(_TURN, middle, color=color, linewidth=1.0, label=f"{name}, 95 %")
        reach = max(reach, 1.1 * float(np.max(np.abs(middle) + 2.0 * u)))
    if directions:
        rest.set_ylim(-reach, reach)
        above(rest)


def above(axes: "Axes") -> None:
    """Put the legend above the panel, where it hides no data.

    Parameters
    ----------
    axes : Axes
        With labelled lines.
    """
    axes.legend(
        loc="lower right",
        bbox_to_anchor=(1.0, 1.0),
        ncols=3,
        fontsize=8,
        frameon=False,
        markerscale=5.0,
        borderaxespad=0.2,
    )
