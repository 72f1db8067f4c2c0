"""The state of a live page as figures to read."""

from math import degrees
from typing import TYPE_CHECKING, Any

import numpy as np

from calibration.desk.watch.state import WatchState

if TYPE_CHECKING:
    from calibration.desk.watch.line_block import LinePoint

__all__ = ["figures"]


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
