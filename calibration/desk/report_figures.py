"""The report's pictures: budget, fringe, spectrum, response."""

from __future__ import annotations

from typing import TYPE_CHECKING, Any

from calibration.errors import CalibrationError
from firmware_bridge.errors import BridgeError
from metro.extras import require

if TYPE_CHECKING:
    from collections.abc import Iterator, Sequence
    from pathlib import Path

    from calibration.desk.evidence import Evidence
    from calibration.record import Calibration
    from metro.bench import Bench
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
    calibration: Calibration, evidence: Sequence[Evidence], bench: Bench | None = None
) -> Iterator[tuple[Any, str]]:
    """Yield the pictures of a session with their captions.

    Parameters
    ----------
    calibration : Calibration
        The result.
    evidence : sequence of Evidence
        Only unchanged recordings are drawn from.
    bench : Bench, optional
        For the noise that is expected.

    Yields
    ------
    tuple of (matplotlib.figure.Figure, str)
        Fringe and spectrum where their recordings are there; the response always.
    """
    yield from _fringe(calibration, evidence)
    yield from _spectrum(calibration, evidence, bench)
    yield from _response(calibration)


def _fringe(calibration: Calibration, evidence: Sequence[Evidence]) -> Iterator[tuple[Any, str]]:
    from calibration.session import photodiode_name
    from calibration.session_plot import draw_scan
    from firmware_bridge.opening import open_recording

    path = _first(evidence, "scan")
    if path is None:
        return
    recording = open_recording(path)
    scan = recording.trace(photodiode_name(recording))
    figure = _figure(2.6)
    draw_scan(figure.add_subplot(), calibration, scan.values, scan.rate_hz)
    yield figure, "A scan over whole fringes, with the extremes fitted to all scans."


def _spectrum(
    calibration: Calibration, evidence: Sequence[Evidence], bench: Bench | None
) -> Iterator[tuple[Any, str]]:
    from calibration.session import photodiode_name
    from calibration.spectrum_plot import spectrum_figure
    from calibration.spectrum_reading import read_spectrum
    from firmware_bridge.opening import open_recording
    from metro.bench import Bench as AnyBench

    rising, falling = _first(evidence, "lines-rising"), _first(evidence, "lines-falling")
    path, slope = (rising, "rising") if rising else (falling, "falling")
    if path is None:
        return
    recording = open_recording(path)
    try:
        found, _ = read_spectrum(
            recording,
            photodiode_name(recording),
            bench or AnyBench.of(),
            calibration,
            "displacement",
            slope,
        )
    except (CalibrationError, BridgeError):
        return  # a picture is no result: the report goes on without it
    figure = spectrum_figure(found, f"lines recording, {slope} slope", "displacement")
    figure.set_size_inches(8.6, 5.2 if found.expected else 4.0)
    beside = " beside the noise that the bench should have" if found.expected else ""
    yield figure, f"Spectral density of the displacement, by this calibration{beside}."


def _response(calibration: Calibration) -> Iterator[tuple[Any, str]]:
    from calibration.response_plot import draw_residuals
    from calibration.session_plot import response_figure

    yield (
        response_figure(calibration),
        "Response of the actuator: magnitude and phase with their expanded uncertainties.",
    )
    if calibration.response is not None:
        figure = _figure(2.2)
        draw_residuals(figure.add_subplot(), calibration.actuator, calibration.response)
        yield (
            figure,
            "What the fitted response leaves of the lines, with each line's own part of U.",
        )


def _first(evidence: Sequence[Evidence], role: str) -> Path | None:
    return next((item.path for item in evidence if item.is_unchanged and item.role == role), None)


def _figure(height: float) -> Any:  # noqa: ANN401  # matplotlib's Figure
    figures = require("matplotlib.figure", "bench", "a report")
    return figures.Figure(figsize=(7.4, height), layout="constrained")
