"""A stream whose samples can be computed from their index, so that each one received can be checked."""

from dataclasses import dataclass

import numpy as np

from firmware_bridge.announcement import Announcement, ChannelInfo, encode_announcement
from firmware_bridge.frame import encode_stream

__all__ = ["RATE_HZ", "SLOTS", "Batch", "KnownStream", "samples"]

RATE_HZ, SLOTS = 1e5, 64
_SLOTS_SENT = (64, 64, 64, 64, 64, 64, 64, 64, 25, 3)  # a frame may have fewer than announced


def samples(stream, index, n):
    """Return n samples of two channels: noise of full scale, and small counts with many zero bytes."""
    mixed = np.arange(index, index + n, dtype=np.uint64) * np.uint64(0x9E3779B97F4A7C15)
    mixed += np.uint64(stream * 0xD1B54A32D192ED03 % 2**64)
    mixed = (mixed ^ (mixed >> np.uint64(29))) * np.uint64(0xBF58476D1CE4E5B9)
    noise = (mixed >> np.uint64(48)).astype(np.uint16).view(np.int16)
    small = ((mixed >> np.uint64(33)) & np.uint64(3)).astype(np.int16)
    return np.stack([noise, small], axis=1)


@dataclass(eq=False)
class Batch:
    """Some frames as they go over the wire: their bytes, and for each frame where and what it is."""

    wire: bytes
    starts: np.ndarray  # of the delimiter before each frame
    ends: np.ndarray  # of the delimiter behind it
    index: np.ndarray
    filled: np.ndarray


class KnownStream:
    """One start of a board: its announcement and its frames."""

    def __init__(self, stream, rng, rate_hz=RATE_HZ):
        self.stream = stream
        self.rate_hz = rate_hz
        self.next = 0
        self._sequence = 0
        self._rng = rng

    def announcement(self):
        channels = [ChannelInfo("noise", "1"), ChannelInfo("small", "1")]
        return encode_announcement(
            Announcement(self.stream, self.rate_hz, "int16", SLOTS, channels, board="known")
        )

    def batch(self, frames):
        """Return the next frames, of one number of slots, the last one perhaps filled in part."""
        slots = int(self._rng.choice(_SLOTS_SENT))
        n = frames * slots - int(self._rng.integers(0, slots))
        wire = encode_stream(
            samples(self.stream, self.next, n),
            slots=slots,
            first_index=self.next,
            first_sequence=self._sequence,
            stream=self.stream,
        )
        zeros = np.flatnonzero(np.frombuffer(wire, np.uint8) == 0)
        filled = np.full(frames, slots)
        filled[-1] = n - (frames - 1) * slots
        index = self.next + np.arange(frames) * slots
        self.next += n
        self._sequence = (self._sequence + frames) % 2**32
        return Batch(wire, zeros[::2], zeros[1::2], index, filled)
