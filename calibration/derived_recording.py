"""A recording in other units: other channels on the grid of a recording."""

from collections.abc import Sequence

from firmware_bridge.channel import Channel
from firmware_bridge.trace import Recording

__all__ = ["DerivedRecording"]


class DerivedRecording(Recording):
    """What is made of a recording while it is read; grid, gaps, times and remarks are its own.

    Subclasses implement `read`.

    Parameters
    ----------
    source : Recording
        The recording.
    channels : sequence of Channel
        What it becomes.
    """

    def __init__(self, source: Recording, channels: Sequence[Channel]) -> None:
        self._source = source
        super().__init__(
            path=source.path,
            format=source.format,
            rate_hz=source.rate_hz,
            channels=channels,
            length=source.length,
            rate_u_hz=source.rate_u_hz,
            gaps=source.gaps,
            over_range=source.over_range,
            remarks=source.remarks,
            start_unix_s=source.start_unix_s,
            timing=source.timing,
        )
