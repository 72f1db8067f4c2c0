"""What a live port tells: channels, blocks of values, gaps, its state, the recording, replies."""

from dataclasses import dataclass, field, replace
from typing import Any

import numpy as np
from numpy.typing import NDArray

from firmware_bridge.announcement import Announcement, ChannelInfo
from firmware_bridge.drive_lines import DriveLine, full_scale_v
from firmware_bridge.samples_frame import Samples

__all__ = [
    "LiveBlock",
    "LiveChannels",
    "LiveEvent",
    "LiveGap",
    "LiveLines",
    "LiveRecording",
    "LiveReply",
    "LiveState",
    "block_of",
    "channels_of",
]


@dataclass(frozen=True, slots=True)
class LiveChannels:
    """What a board says about the blocks that follow.

    Parameters
    ----------
    rate_hz : float
        Samples per second and channel.
    channels : tuple of ChannelInfo
        Names, units and scales; the values of blocks are scaled already.
    board, firmware : str
        Identity and firmware version.
    simulated : bool
        Whether the board is a simulated one.
    speed : float
        How much faster than real time it runs.
    full_scale_v : float or None
        Full scale of the drive [V of the drive's channel]; None for a board without drive lines.
    stream : int
        Stream id: another one after a restart of the board.
    """

    rate_hz: float
    channels: tuple[ChannelInfo, ...]
    board: str = ""
    firmware: str = ""
    simulated: bool = False
    speed: float = 1.0
    full_scale_v: float | None = None
    stream: int = 0


@dataclass(frozen=True, slots=True, eq=False)
class LiveBlock:
    """Consecutive samples of all channels.

    Parameters
    ----------
    start_index : int
        Of the first sample, counted on from the first one seen, gaps included.
    values : ndarray of float64, shape (n, channels)
        In the channels' units; NaN where over-range.
    over_range : int
        How many values are.
    clock : int
        Board clock at the first sample.
    host_time : float
        UTC [s since 1970] at which the samples arrived.
    """

    start_index: int
    values: NDArray[np.float64]
    over_range: int = 0
    clock: int = 0
    host_time: float = 0.0

    def first(self, count: int) -> "LiveBlock":
        """Return the block's first ``count`` samples.

        Parameters
        ----------
        count : int
            At least 1; where there are no more, the block itself.

        Returns
        -------
        LiveBlock
            Over-range counted as far as it reaches.
        """
        if count >= len(self.values):
            return self
        values = self.values[:count]
        over_range = int(np.count_nonzero(np.isnan(values)))
        return replace(self, values=values, over_range=over_range)


@dataclass(frozen=True, slots=True)
class LiveGap:
    """Samples that are missing; not exact across a restart, where the host's clock tells."""

    start_index: int
    length: int
    exact: bool = True


@dataclass(frozen=True, slots=True)
class LiveState:
    """How the port stands.

    Parameters
    ----------
    state : str
        "connected", "gone" (and waited for), "silent", "behind" (blocks were left out of the view,
        never of the recording), "failed" or "closed".
    reason : str
        Why, in words.
    """

    state: str
    reason: str = ""


@dataclass(frozen=True, slots=True)
class LiveRecording:
    """The recording that runs: ``file`` is None where none does; ``reason`` says why it ended."""

    file: str | None
    samples: int = 0
    bytes: int = 0
    reason: str = ""


@dataclass(frozen=True, slots=True)
class LiveReply:
    """What the board answers, or why a command was not sent; ``refused`` if it does not follow."""

    text: str
    refused: bool = field(default=False)


@dataclass(frozen=True, slots=True)
class LiveLines:
    """The lines of the drive, told at every change of them.

    Parameters
    ----------
    lines : dict of int to DriveLine
        The largest that each of the board's slots may hold, by its answers.
    wanted : dict of int to DriveLine
        What the slots shall hold in the end.
    is_at_rest : bool
        Whether the board has confirmed that all lines are cleared and the offset goes to 0, and no
        line has been sent since.
    orders : int
        Number of the last order that is taken account of here.
    """

    lines: dict[int, DriveLine]
    wanted: dict[int, DriveLine]
    is_at_rest: bool = False
    orders: int = 0


LiveEvent = LiveChannels | LiveBlock | LiveGap | LiveState | LiveRecording | LiveReply | LiveLines


def channels_of(announcement: Announcement) -> LiveChannels:
    """Return what an announcement says about the blocks that follow.

    Parameters
    ----------
    announcement : Announcement
        Of the board.

    Returns
    -------
    LiveChannels
        The same for a viewer.
    """
    return LiveChannels(
        announcement.rate_hz,
        tuple(announcement.channels),
        announcement.board,
        announcement.firmware,
        announcement.simulated,
        announcement.speed,
        full_scale_v(announcement),
        announcement.stream,
    )


def block_of(
    frame: Samples, announcement: Announcement, start_index: int, host_time: float
) -> LiveBlock:
    """Return the values of one frame, NaN where over-range.

    Parameters
    ----------
    frame : Samples
        Counts.
    announcement : Announcement
        Scales and ranges.
    start_index : int
        Where its first sample stands.
    host_time : float
        UTC at its arrival [s].

    Returns
    -------
    LiveBlock
        Scaled.
    """
    infos = announcement.channels
    scale = np.array([info.scale for info in infos])
    values = frame.data * scale + np.array([info.offset for info in infos])
    over_range = 0
    if frame.over_range:
        hit = _over(frame.data, announcement)
        values[hit] = np.nan
        over_range = int(np.count_nonzero(hit))
    return LiveBlock(start_index, values, over_range, frame.clock, host_time)


def _over(counts: NDArray[Any], announcement: Announcement) -> NDArray[np.bool_]:
    bottom, top = announcement.code_limits
    low = [bottom if info.low is None else info.low for info in announcement.channels]
    high = [top if info.high is None else info.high for info in announcement.channels]
    hit: NDArray[np.bool_] = (counts <= np.array(low)) | (counts >= np.array(high))
    if not hit.any():  # the board says there is one; any of them may be it
        hit[:] = True
    return hit
