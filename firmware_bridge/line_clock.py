"""The rate of recorded lines of text, from the stamps of the whole recording."""

from collections.abc import Mapping
from dataclasses import dataclass, replace
from typing import Any

import numpy as np
from numpy.typing import NDArray

from firmware_bridge.pleasing_rate import pleasing_rate_hz
from firmware_bridge.steady_rate import fit_step
from firmware_bridge.timing import Timing

__all__ = ["FrameClocks", "LineClock"]

_FEWEST = 8  # frames: fewer tell no better than the first lines did


@dataclass(frozen=True, slots=True)
class LineClock:
    """What clock a recording of lines goes by.

    Parameters
    ----------
    rate_hz : float
        Lines per second.
    rate_u_hz : float or None
        Its standard uncertainty by the clock that stamped the lines, None where unknown.
    timing : Timing
        What the times rest on.
    """

    rate_hz: float
    rate_u_hz: float | None
    timing: Timing


class FrameClocks:
    """Collect the clocks of a recording's frames, and fit the rate to them.

    Parameters
    ----------
    origin : mapping of str to str
        What the header says of the lines.
    rate_hz : float
        As announced, from the first lines.
    clock_hz : int
        Ticks per second.
    """

    def __init__(self, origin: Mapping[str, str], rate_hz: float, clock_hz: int) -> None:
        self._clock = origin.get("clock", "")
        # A rate by the host's clock is safe from lost lines where the board counts them.
        is_by_host = self._clock == "host" and "time" not in origin
        self._announced = LineClock(rate_hz, None, Timing(is_by_host))
        self._tick_s = 1 / clock_hz if clock_hz else 0.0
        self._resolution_s = float(origin.get("resolution", "0")) if self._is_board else 0.0
        self._parts: list[tuple[NDArray[np.int64], ...]] = []

    @property
    def _is_board(self) -> bool:
        return self._clock == "stamps"

    def add(self, heads: NDArray[Any]) -> None:
        """Take the headers of some frames.

        Parameters
        ----------
        heads : ndarray of `HEADER`, shape (n,)
            The next ones.
        """
        fields = ("stream", "index", "clock", "filled", "slots")
        self._parts.append(tuple(heads[name].astype(np.int64) for name in fields))

    def _joined(self) -> tuple[NDArray[np.int64], NDArray[np.int64], NDArray[np.int64]]:
        streams, index, ticks, filled, slots = (
            np.concatenate(part) for part in zip(*self._parts, strict=True)
        )
        # A frame that ends early does so before a line that came late: such lines, at the
        # beginning of the next frame, are no fair sample of the stamps.
        fair = np.concatenate(([True], filled[:-1] == slots[:-1]))
        if np.count_nonzero(fair) >= max(_FEWEST, 0.2 * fair.size):
            streams, index, ticks = streams[fair], index[fair], ticks[fair]
        return streams, index, ticks

    def fit(self) -> LineClock:
        """Return the rate of the whole recording, and the jitter of the lines.

        Returns
        -------
        LineClock
            The announced rate where it was given, or the frames are too few.
        """
        if self._clock not in ("stamps", "host") or not self._parts or not self._tick_s:
            return self._announced
        streams, index, ticks = self._joined()
        if index.size < _FEWEST:
            return self._announced
        broken = np.diff(streams) != 0
        # Streams one behind the other: each is fitted with a line of its own, of the same slope.
        steps = np.where(broken, 1, np.diff(index))
        places = np.concatenate(([0], np.cumsum(steps)))
        stamps = (ticks - ticks[0]) * self._tick_s
        found = fit_step(stamps, places, self._resolution_s, broken)
        if not (found.step_s > 0 and np.isfinite(found.step_u_s)):
            return self._announced
        rate_hz = 1 / found.step_s
        if self._is_board:
            rate_hz = pleasing_rate_hz(found, stamps, places)
        timing = self._announced.timing
        if self._is_board and not found.is_rounding:
            left = found.scatter_s**2 - self._resolution_s**2 / 12
            jitter_s = float(np.sqrt(max(0.0, left)))
            timing = replace(
                timing, jitter_s=jitter_s, jitter_u_s=jitter_s / (2 * index.size) ** 0.5
            )
        return LineClock(rate_hz, found.step_u_s * rate_hz**2, timing)
