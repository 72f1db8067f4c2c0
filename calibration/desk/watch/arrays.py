"""The state of a live page as arrays to draw."""

from math import degrees
from typing import TYPE_CHECKING, Any

import numpy as np
from numpy.typing import NDArray

if TYPE_CHECKING:
    from calibration.desk.watch.line_block import LinePoint
    from calibration.desk.watch.state import WatchState

__all__ = ["fringe_arrays", "line_arrays", "spectrum_arrays", "trace_arrays"]

Arrays = dict[str, NDArray[Any]]

_FRINGE_POINTS = 181


def trace_arrays(state: "WatchState", window_s: float) -> Arrays:
    """Return the trace over a window and the fringe with the working point.

    Parameters
    ----------
    state : WatchState
        What is known.
    window_s : float
        One of `state.WINDOWS_S`.

    Returns
    -------
    dict of str to ndarray
        ``trace_t`` [s], ``trace_low``, ``trace_high``, ``trace_lost`` (0 or 1).
    """
    view = state.trace(window_s)
    return {
        "trace_t": view.time_s,
        "trace_low": view.low,
        "trace_high": view.high,
        "trace_lost": view.lost,
    }


def fringe_arrays(state: "WatchState") -> Arrays:
    """Return the fringe as a curve: ``fringe_deg`` and ``fringe_v``; empty while it is unknown."""
    fringe = state.fringe
    if fringe is None:
        return {"fringe_deg": np.zeros(0), "fringe_v": np.zeros(0)}
    phase_deg = np.linspace(-180.0, 180.0, _FRINGE_POINTS)
    return {"fringe_deg": phase_deg, "fringe_v": fringe.volts(np.radians(phase_deg))}


def spectrum_arrays(state: "WatchState") -> Arrays:
    """Return the spectrum: ``spectrum_f`` [Hz], ``spectrum_mean``, ``_highest`` and ``_expected``.

    Parameters
    ----------
    state : WatchState
        What is known.

    Returns
    -------
    dict of str to ndarray
        Densities in unit/√Hz; ``spectrum_expected`` is NaN where nothing is expected.
    """
    if state.stream is None:
        none = np.zeros(0)
        return dict.fromkeys(
            ("spectrum_f", "spectrum_mean", "spectrum_highest", "spectrum_expected"), none
        )
    view, noise = state.stream.spectrum.view(), state.stream.noise
    nothing = np.full(view.frequency_hz.size, np.nan)
    return {
        "spectrum_f": view.frequency_hz,
        "spectrum_mean": view.density,
        "spectrum_highest": view.highest,
        "spectrum_expected": nothing if noise is None or not nothing.size else noise.density,
    }


def line_arrays(state: "WatchState") -> Arrays:
    """Return every line's course over the last minutes, one line after the other.

    Parameters
    ----------
    state : WatchState
        What is known.

    Returns
    -------
    dict of str to ndarray
        ``line_number`` (place in ``figures(state)["lines"]``), ``line_t`` [s before now],
        ``line_amplitude``, ``line_amplitude_u``, ``line_phase`` and ``line_phase_u`` [degrees]; u
        is expanded (95 %).
    """
    rows: list[tuple[float, ...]] = []
    if state.stream is not None:
        now_s, lines = state.stream.time_s, state.stream.lines
        for number, frequency_hz in enumerate(lines.frequencies_hz):
            rows += [_row(number, now_s, point) for point in lines.points(frequency_hz)]
    table = np.array(rows).reshape(-1, 6)
    names = ("number", "t", "amplitude", "amplitude_u", "phase", "phase_u")
    return {f"line_{name}": table[:, k] for k, name in enumerate(names)}


def _row(number: int, now_s: float, point: "LinePoint") -> tuple[float, ...]:
    return (
        float(number),
        point.time_s - now_s,
        point.amplitude,
        point.amplitude_u95,
        degrees(point.phase_rad),
        degrees(point.phase_u95_rad),
    )
