"""A recording replayed as if it came from a port, at its own pace or faster."""

import time
from math import ceil
from pathlib import Path
from typing import NoReturn

import numpy as np

from firmware_bridge.announcement import ChannelInfo
from firmware_bridge.errors import BridgeError
from firmware_bridge.live_events import LiveBlock, LiveChannels, LiveEvent, LiveGap, LiveState
from firmware_bridge.trace import Recording

__all__ = ["Replay"]

_PIECE_S = 0.1  # longest stretch in one block


class Replay:
    """A recording as a source for a live page.

    Parameters
    ----------
    recording : Recording
        Any that can be opened.
    speed : float
        Times its own pace; > 0.
    """

    def __init__(self, recording: Recording, speed: float = 1.0) -> None:
        self._recording, self._speed = recording, speed
        self._next = 0
        self._gaps = sorted(recording.gaps, key=lambda gap: gap.index)
        self._begun_s: float | None = None
        self._is_ended = False

    def poll(self) -> list[LiveEvent]:
        """Return what is due by now."""
        recording, now_s = self._recording, time.monotonic()
        if self._begun_s is None:
            self._begun_s = now_s
            return [self._channels(), LiveState("connected", "replayed")]
        due = int((now_s - self._begun_s) * self._speed * recording.rate_hz)
        stop = min(due, recording.length)
        events: list[LiveEvent] = []
        piece = max(1, ceil(_PIECE_S * self._speed * recording.rate_hz))
        while self._next < stop:
            end = min(self._next + piece, stop)
            events += self._piece(self._next, end)
            self._next = end
        if self._next >= recording.length and not self._is_ended:
            self._is_ended = True
            events.append(LiveState("closed", "the recording is over"))
        return events

    def _channels(self) -> LiveChannels:
        channels = tuple(ChannelInfo(c.name, c.unit) for c in self._recording.channels)
        return LiveChannels(self._recording.rate_hz, channels, speed=self._speed)

    def _piece(self, start: int, stop: int) -> list[LiveEvent]:
        """Return the samples from ``start`` to ``stop``, and the gaps that begin there."""
        events: list[LiveEvent] = []
        while self._gaps and self._gaps[0].index < stop:
            gap = self._gaps.pop(0)
            events.append(LiveGap(gap.index, gap.length, gap.exact))
        span = self._recording.read(range(len(self._recording.channels)), start, stop)
        if np.isfinite(span.values).any() or span.over_range:
            events.append(LiveBlock(start, span.values, span.over_range, host_time=time.time()))
        return events

    def start_recording(self, name: str) -> Path:
        """Refuse: a recording is replayed."""
        raise BridgeError(f"a recording is replayed: there is nothing to record into {name!r}")

    def stop_recording(self) -> None:
        """Do nothing: no recording runs."""

    def set_line(
        self, slot: int, frequency_hz: float, amplitude_v: float, phase_rad: float = 0.0
    ) -> NoReturn:
        """Refuse: there is no drive."""
        raise BridgeError(
            f"a recording is replayed: line {slot} at {frequency_hz:g} Hz, {amplitude_v:g} V, "
            f"{phase_rad:g} rad is not set"
        )

    def clear_line(self, slot: int) -> int:  # noqa: ARG002  # there is none
        """Do nothing: there is no drive."""
        return 0

    def rest(self) -> int:
        """Do nothing: there is no drive."""
        return 0

    def close(self) -> None:
        """Do nothing: the file is read as needed."""
