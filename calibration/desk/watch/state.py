"""The state of a live page: what a port tells goes in, what the page shows comes out.

Nothing here knows of browsers or ports. Memory is bounded by the windows shown, whatever the time.
"""

from collections.abc import Callable
from dataclasses import dataclass
from typing import Any

import numpy as np
from numpy.typing import NDArray

from calibration.desk.watch.envelope import Envelope, EnvelopeView
from calibration.desk.watch.fringe import Fringe, Resting, resting
from calibration.desk.watch.line_block import LineBlock, fit_block
from calibration.desk.watch.losses import Losses
from calibration.desk.watch.setup import WatchSetup
from calibration.desk.watch.stream import REST_S, Stream
from firmware_bridge.live_events import (
    LiveBlock,
    LiveChannels,
    LiveEvent,
    LiveGap,
    LiveLines,
    LiveRecording,
    LiveReply,
    LiveState,
)

__all__ = ["Job", "WatchState"]

FloatArray = NDArray[np.float64]

_SETTLE_S = 1.0  # after a change of the drive, before lines are fitted again


@dataclass(frozen=True, eq=False, slots=True)
class Job:
    """Work that takes longer than a page may wait: ``deliver(work())``, the work anywhere."""

    work: Callable[[], Any]
    deliver: Callable[[Any], None]


class WatchState:
    """What a page shows, kept up to date with what a port tells.

    Parameters
    ----------
    setup : WatchSetup
        What to show.
    """

    def __init__(self, setup: WatchSetup) -> None:
        self.setup = setup
        self.stream: Stream | None = None
        self.losses = Losses()
        self.port = LiveState("waiting", "no sample yet")
        self.recording = LiveRecording(None)
        self.replies: list[LiveReply] = []
        """What the board answered since `take_replies`."""
        self.drive_lines: list[LiveLines] = []
        """What was said of the drive since `take_drive_lines`."""
        self.found: Fringe | None = None
        self._stated = setup.fringe
        self._driven_hz: tuple[float, ...] = ()

    def take(self, event: LiveEvent) -> list[Job]:
        """Take one event and return the work it makes due.

        Parameters
        ----------
        event : LiveEvent
            From the port, in order.

        Returns
        -------
        list of Job
            Fits, to be done at leisure.
        """
        match event:
            case LiveBlock():
                return self._take_block(event)
            case LiveChannels():
                self._take_channels(event)
            case LiveGap():
                self._take_gap(event)
            case LiveState():
                self.port = event
            case LiveRecording():
                self.recording = event
            case LiveReply():
                self.replies.append(event)
            case LiveLines():
                self.drive_lines.append(event)
        return []

    def take_drive_lines(self) -> list[LiveLines]:
        """Return what was said of the drive since the last call."""
        said, self.drive_lines = self.drive_lines, []
        return said

    def take_replies(self) -> list[LiveReply]:
        """Return what the board answered since the last call."""
        replies, self.replies = self.replies, []
        return replies

    def set_driven(self, frequencies_hz: tuple[float, ...]) -> None:
        """Follow the lines that the drive holds, besides those asked for.

        Parameters
        ----------
        frequencies_hz : tuple of float
            Lines that are set [Hz]. All fits begin anew: every amplitude may change.
        """
        self._driven_hz = frequencies_hz
        self._set_lines(_SETTLE_S)

    def _set_lines(self, settle_s: float) -> None:
        if self.stream is not None:
            self.stream.lines.set_lines((*self.setup.lines_hz, *self._driven_hz), settle_s)

    def _take_channels(self, said: LiveChannels) -> None:
        old = self.stream
        if old is not None and _same(old.said, said):
            old.said = said
            old.lines.restart()  # the board's sample 0, and with it every phase, is another one
            return
        self.stream = Stream(self.setup, said)
        self.found = None
        self._set_lines(0.0)

    def _take_gap(self, gap: LiveGap) -> None:
        if self.stream is not None:
            self.losses.lose(gap.length, gap.start_index / self.stream.said.rate_hz)

    def _take_block(self, block: LiveBlock) -> list[Job]:
        stream = self.stream
        if stream is None or not block.values.size:
            return []
        self.port = LiveState("connected") if self.port.state == "waiting" else self.port
        values = np.ascontiguousarray(block.values[:, stream.photodiode])
        stream.samples = block.start_index + values.size
        stream.arrived_unix_s = block.host_time
        self.losses.exceed(block.over_range, stream.time_s)
        for envelope in (*stream.envelopes.values(), stream.rest):
            envelope.add(block.start_index, values)
        self._take_mean(stream, values)
        stream.spectrum.add(block.start_index, values)
        jobs = [
            self._line_job(stream, full)
            for full in stream.lines.add(block.start_index, block.values[:, stream.columns])
        ]
        look = stream.finder.add(block.start_index, values, self.fringe)
        if look is not None:
            dark_v = self.setup.dark_v
            jobs.append(Job(lambda: look(dark_v), self._take_found))
        return jobs

    def _take_mean(self, stream: Stream, values: FloatArray) -> None:
        """Follow the mean with the time constant of the working point."""
        good = values[np.isfinite(values)]
        if good.size:
            kept = np.exp(-good.size / (stream.said.rate_hz * REST_S))
            old = stream.mean if np.isfinite(stream.mean) else float(good.mean())
            stream.mean = kept * old + (1.0 - kept) * float(good.mean())

    def _line_job(self, stream: Stream, full: LineBlock) -> Job:
        return Job(lambda: fit_block(full), lambda fit: stream.lines.take(full, fit))

    def _take_found(self, fringe: Fringe | None) -> None:
        if fringe is not None:
            self.found = fringe

    @property
    def fringe(self) -> Fringe | None:
        """The fringe as calibrated or stated, else as found; None while unknown."""
        if self._stated is not None and (self.stream is None or self.stream.unit == "V"):
            return self._stated
        return self.found

    @property
    def resting(self) -> Resting | None:
        """The working point, None while the fringe is unknown."""
        if self.stream is None or self.fringe is None or not np.isfinite(self.stream.mean):
            return None
        return resting(self.stream.mean, self.fringe, self.setup.slope)

    @property
    def contrast(self) -> tuple[float, str] | None:
        """Contrast and where it comes from: as seen, else as calibrated or stated."""
        if self.found is not None and self.found.contrast is not None:
            return self.found.contrast, self.found.origin
        return self.setup.stated_contrast

    def trace(self, window_s: float) -> EnvelopeView:
        """Return the envelope of the photodiode over one of `stream.WINDOWS_S`."""
        if self.stream is None:
            return Envelope(1.0, window_s).view()
        return self.stream.envelopes[window_s].view()


def _same(old: LiveChannels, new: LiveChannels) -> bool:
    return old.rate_hz == new.rate_hz and old.channels == new.channels
