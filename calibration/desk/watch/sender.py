"""What is sent to the pages, and when: the trace ten times a second, the rest less often."""

import time
from dataclasses import dataclass, field
from typing import Any

from calibration.desk.watch.arrays import (
    fringe_arrays,
    line_arrays,
    spectrum_arrays,
    trace_arrays,
)
from calibration.desk.watch.document import figures
from calibration.desk.watch.orders import Orders
from calibration.desk.watch.state import WatchState
from calibration.desk.watch.stream import WINDOWS_S
from calibration.desk.watch.wire import pack

__all__ = ["Latency", "Viewer", "message_for"]

_SLOW_TICKS = 5  # of the trace, between two spectra and two courses of lines


@dataclass(slots=True)
class Viewer:
    """One page that is open: what it wants to see."""

    window_s: float = 10.0
    ticks: int = 0
    has_plots: bool = True

    def wish(self, order: dict[str, Any]) -> None:
        """Show another stretch of the trace, if it is one of `WINDOWS_S`."""
        if order.get("window_s") in WINDOWS_S:
            self.window_s = float(order["window_s"])
            self.ticks = 0


@dataclass(slots=True)
class Latency:
    """From the arrival of a block at the host to the message that shows it [s]."""

    newest_s: float = 0.0
    worst_s: float = 0.0
    total_s: float = 0.0
    count: int = 0
    _last: float = field(default=0.0)

    def see(self, arrived_unix_s: float) -> None:
        """Take note of the newest block's arrival (UTC) when a message is made."""
        if not arrived_unix_s or arrived_unix_s == self._last:
            return
        self._last = arrived_unix_s
        self.newest_s = max(0.0, time.time() - arrived_unix_s)
        self.worst_s = max(self.worst_s, self.newest_s)
        self.total_s += self.newest_s
        self.count += 1

    @property
    def mean_s(self) -> float:
        """Mean over all messages."""
        return self.total_s / self.count if self.count else 0.0


def message_for(viewer: Viewer, state: WatchState, orders: Orders, latency: Latency) -> bytes:
    """Return the next message for a page.

    Parameters
    ----------
    viewer : Viewer
        The page; its count of messages goes up by one.
    state : WatchState
        What is known.
    orders : Orders
        The drive.
    latency : Latency
        Sent along.

    Returns
    -------
    bytes
        See `wire`.
    """
    arrays = trace_arrays(state, viewer.window_s) if viewer.has_plots else {}
    if viewer.has_plots and viewer.ticks % _SLOW_TICKS == 0:
        arrays |= {**fringe_arrays(state), **spectrum_arrays(state), **line_arrays(state)}
    viewer.ticks += 1
    document = figures(state) | {
        "drive": orders.document(),
        "window_s": viewer.window_s,
        "has_plots": viewer.has_plots,
        "latency_s": latency.newest_s,
    }
    if state.stream is not None:
        view = state.stream.spectrum.view() if "spectrum_f" in arrays else None
        if view is not None:
            document["spectrum"] = {
                "averages": view.averages,
                "left_out": view.left_out,
                "bandwidth_hz": view.noise_bandwidth_hz,
                "sources": [] if state.stream.noise is None else list(state.stream.noise.sources),
            }
        document["line_remarks"] = [*state.stream.remarks, *state.stream.lines.remarks]
    return pack(document, arrays)
