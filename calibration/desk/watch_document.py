"""The state of a live page as what is sent to it: figures to read and arrays to draw."""

from math import degrees
from typing import TYPE_CHECKING, Any

import numpy as np
from numpy.typing import NDArray

from calibration.desk.watch_state import WatchState

if TYPE_CHECKING:
    from calibration.desk.watch_lines import LinePoint

__all__ = ["figures", "fringe_arrays", "line_arrays", "spectrum_arrays", "trace_arrays"]

Arrays = dict[str, NDArray[Any]]

_FRINGE_POINTS = 181


def figures(state: WatchState) -> dict[str, Any]:
    """Return the figures of a page.

    Parameters
    ----------
    state : WatchState
        What is known.

    Returns
    -------
    dict
        ``source``, ``port``, ``rest``, ``contrast``, ``losses``, ``clock``, ``recording``,
        ``lines``; null where something is unknown. Volts are the channel's unit.
    """
    stream = state.stream
    now_s = 0.0 if stream is None else stream.time_s
    return {
        "source": _source(state),
        "port": {"state": state.port.state, "reason": state.port.reason},
        "rest": _rest(state),
        "contrast": _contrast(state),
        "losses": state.losses.document(now_s),
        "clock": None if stream is None or stream.lines.clock is None else list(stream.lines.clock),
        "recording": _recording(state),
        "lines": _lines(state),
    }


def _source(state: WatchState) -> dict[str, Any]:
    out: dict[str, Any] = {"title": state.setup.title, "time_s": 0.0, "channels": []}
    if state.stream is not None:
        said = state.stream.said
        out |= {
            "time_s": state.stream.time_s,
            "rate_hz": said.rate_hz,
            "channels": [info.name for info in said.channels],
            "shown": said.channels[state.stream.photodiode].name,
            "unit": state.stream.unit,
            "board": said.board,
            "simulated": said.simulated,
            "has_drive": state.stream.drive is not None,
        }
    return out


def _rest(state: WatchState) -> dict[str, Any] | None:
    stream = state.stream
    if stream is None or not np.isfinite(stream.mean):
        return None
    view = stream.rest.view()
    seen = np.isfinite(view.low)
    out: dict[str, Any] = {
        "volts": stream.mean,
        "low": float(view.low[seen].min()) if seen.any() else None,
        "high": float(view.high[seen].max()) if seen.any() else None,
        "slope": state.setup.slope,
        "verdict": "fringe unknown",
    }
    place, fringe = state.resting, state.fringe
    if place is not None and fringe is not None:
        out |= {
            "verdict": place.verdict,
            "phase_deg": degrees(place.phase_rad),
            "off_deg": degrees(place.off_rad),
            "fringe": {"low": fringe.low_v, "high": fringe.high_v, "origin": fringe.origin},
        }
    return out


def _contrast(state: WatchState) -> dict[str, Any] | None:
    known = state.contrast
    return None if known is None else {"value": known[0], "origin": known[1]}


def _recording(state: WatchState) -> dict[str, Any]:
    running = state.recording
    rate_hz = 0.0 if state.stream is None else state.stream.said.rate_hz
    return {
        "file": running.file,
        "bytes": running.bytes,
        "duration_s": running.samples / rate_hz if rate_hz else 0.0,
        "reason": running.reason,
    }


def _lines(state: WatchState) -> list[dict[str, Any]]:
    if state.stream is None:
        return []
    lines = state.stream.lines
    return [_line(f, lines.points(f)[-1:]) for f in lines.frequencies_hz]


def _line(frequency_hz: float, last: "tuple[LinePoint, ...]") -> dict[str, Any]:
    out: dict[str, Any] = {"frequency_hz": frequency_hz, "amplitude": None, "reasons": []}
    for point in last:
        out |= {
            "amplitude": point.amplitude,
            "amplitude_u95": point.amplitude_u95,
            "phase_deg": degrees(point.phase_rad),
            "phase_u95_deg": degrees(point.phase_u95_rad),
            "ratio": point.ratio,
            "reasons": list(point.reasons),
        }
    return out


def trace_arrays(state: WatchState, window_s: float) -> Arrays:
    """Return the trace over a window and the fringe with the working point.

    Parameters
    ----------
    state : WatchState
        What is known.
    window_s : float
        One of `watch_state.WINDOWS_S`.

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


def fringe_arrays(state: WatchState) -> Arrays:
    """Return the fringe as a curve: ``fringe_deg`` and ``fringe_v``; empty while it is unknown."""
    fringe = state.fringe
    if fringe is None:
        return {"fringe_deg": np.zeros(0), "fringe_v": np.zeros(0)}
    phase_deg = np.linspace(-180.0, 180.0, _FRINGE_POINTS)
    return {"fringe_deg": phase_deg, "fringe_v": fringe.volts(np.radians(phase_deg))}


def spectrum_arrays(state: WatchState) -> Arrays:
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
        "spectrum_expected": nothing if noise is None else noise.at(view.frequency_hz),
    }


def line_arrays(state: WatchState) -> Arrays:
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
