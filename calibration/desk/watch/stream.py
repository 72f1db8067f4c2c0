"""All that a live page keeps of one board's stream: envelopes, spectrum, lines, working point."""

from typing import TYPE_CHECKING

import numpy as np

from calibration.desk.watch.envelope import Envelope
from calibration.desk.watch.fringe_finder import FringeFinder
from calibration.desk.watch.lines import LineWatch
from calibration.desk.watch.spectrum import RunningSpectrum

if TYPE_CHECKING:
    from calibration.desk.watch.setup import WatchSetup
    from calibration.expected_noise import ExpectedNoise
    from firmware_bridge.live_events import LiveChannels

__all__ = ["REST_S", "WINDOWS_S", "Stream"]

WINDOWS_S = (1.0, 10.0, 60.0)
"""The stretches of the trace that a page can show [s]."""

REST_S = 0.25
"""The working point is the mean of this [s]."""


class Stream:
    """All that depends on the board's channels and rate; a board that changes them gets another.

    Parameters
    ----------
    setup : WatchSetup
        What to show.
    said : LiveChannels
        What the board says of itself.
    """

    def __init__(self, setup: "WatchSetup", said: "LiveChannels") -> None:
        self.said, rate_hz = said, said.rate_hz
        names = [info.name for info in said.channels]
        self.photodiode, self.drive = setup.columns(names)
        self.remarks = setup.remarks(names)
        self.columns = [k for k in (self.photodiode, self.drive) if k is not None]
        units = [said.channels[k].unit for k in self.columns]
        self.unit = units[0]
        self.envelopes = {window_s: Envelope(rate_hz, window_s) for window_s in WINDOWS_S}
        self.spectrum = RunningSpectrum(rate_hz)
        self.noise: ExpectedNoise | None = setup.noise(
            rate_hz, said.channels[self.photodiode], self.spectrum.shown_hz
        )
        self.finder = FringeFinder(rate_hz)
        self.lines = LineWatch(
            rate_hz,
            setup.block_s,
            setup.mains_hz,
            (units[0], units[-1]),
            has_drive=self.drive is not None,
        )
        self.rest = Envelope(rate_hz, REST_S, bins=2)
        self.samples = 0  # index after the newest
        self.mean = np.nan
        self.arrived_unix_s = 0.0

    @property
    def time_s(self) -> float:
        """Stream time of the newest sample [s]."""
        return self.samples / self.said.rate_hz
