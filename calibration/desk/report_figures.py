"""The report's pictures: budget, fringe, spectrum, response."""

from __future__ import annotations

from typing import TYPE_CHECKING, Any

from calibration.errors import CalibrationError
from metro.extras import require

if TYPE_CHECKING:
    from collections.abc import Iterator, Sequence

    from calibration.desk.evidence import Evidence
    from calibration.record import Calibration
    from metro.budget import Budget

__all__ = ["budget_figure", "session_figures"]

_SHOWN = 12  # causes in the picture; the table has them all


def budget_figure(budget: Budget, size: float, title: str) -> Any:  # noqa: ANN401  # a Figure
    """Return a picture of a budget: each cause's part of u, largest first.

    Parameters
    ----------
    budget : Budget
        What to draw.
    size : float
        The result's magnitude, in the budget's unit: parts are shown relative to it.
    title : str
        Heading.

    Returns
    -------
    matplotlib.figure.Figure
        Bars in per cent of the result.
    """
    from calibration.session_plot import BLUE, ORANGE

    parts = sorted(
        ((100 * abs(c.effect / size), c.name) for c in budget.contributions), reverse=True
    )[:_SHOWN]
    combined = 100 * budget.combined()[0] / size
    bars = [*reversed(parts), (combined, "combined")]
    figure = _figure(0.9 + 0.26 * len(bars))
    axes = figure.add_subplot()
    colours = [*(BLUE for _ in parts), ORANGE]
    axes.barh(range(len(bars)), [share for share, _ in bars], color=colours)
    axes.set_yticks(range(len(bars)), [name for _, name in bars], fontsize=8)
    axes.set(xlabel="relative standard uncertainty / %", title=title)
    axes.grid(axis="x", linewidth=0.3, alpha=0.6)
    return figure


def session_figures(
    calibration: Calibration, evidence: Sequence[Evidence]
) -> Iterator[tuple[Any, str]]:
    """Yield the pictures of a session with their captions.

    Parameters
    ----------
    calibration : Calibration
        The result.
    evidence : sequence of Evidence
        Only unchanged recordings are drawn from.

    Yields
    ------
    tuple of (matplotlib.figure.Figure, str)
        Fringe and spectrum where their recordings are there; the response always.
    """
    from calibration import session_plot

    shown = _shown(calibration, evidence)
    if shown is not None and shown.scan is not None:
        figure = _figure(2.6)
        session_plot.draw_scan(
            figure.add_subplot(), calibration, shown.scan.values, shown.scan.rate_hz
        )
        yield figure, "A scan over whole fringes, with the extremes fitted to all scans."
    if shown is not None:
        figure = _figure(3.0)
        session_plot.draw_spectrum(
            figure.add_subplot(), calibration, shown.moved.values, shown.moved.rate_hz
        )
        yield figure, "Displacement of the lines recording, by this calibration; lines dashed."
    figure = _figure(2.8)
    session_plot.draw_actuator(figure.add_subplot(), calibration)
    yield figure, "Response of the actuator: magnitude and phase with their expanded uncertainties."


def _shown(calibration: Calibration, evidence: Sequence[Evidence]) -> Any:  # noqa: ANN401  # Shown
    from calibration.session_plot import Shown

    files: dict[str, list[str]] = {}
    for item in evidence:
        if item.is_unchanged:
            files.setdefault(item.role, []).append(str(item.path))
    if not (files.get("lines-rising") or files.get("lines-falling")):
        return None
    try:
        return Shown.of_files(calibration, files)
    except CalibrationError:  # a picture is no result: the report goes on without it
        return None


def _figure(height: float) -> Any:  # noqa: ANN401  # matplotlib's Figure
    figures = require("matplotlib.figure", "bench", "a report")
    return figures.Figure(figsize=(7.4, height), layout="constrained")
