"""Line source: the samples of response and drive, from arrays or from a recording of any size."""

from abc import ABC, abstractmethod
from collections.abc import Iterator, Sequence
from concurrent.futures import ThreadPoolExecutor
from itertools import pairwise
from typing import TYPE_CHECKING, Any

import numpy as np
from numpy.typing import NDArray

from calibration.errors import CalibrationError

if TYPE_CHECKING:
    from firmware_bridge.trace import Recording

__all__ = ["ArraySource", "LineSource", "RecordingSource", "SourceChannel"]

_CHUNK_SAMPLES = 1 << 20  # 8 MB of float64 a channel
_FEWEST_SAMPLES = 16


class LineSource(ABC):
    """Samples of one or two channels, evenly spaced.

    Parameters
    ----------
    rate_hz : float
        Sampling rate [Hz].
    start : int
        Number of the first sample, counted from the recording's first, where t = 0.
    length : int
        Samples, gaps included.
    """

    def __init__(self, rate_hz: float, start: int, length: int) -> None:
        self.rate_hz, self.start, self.length = rate_hz, start, length

    @property
    @abstractmethod
    def width(self) -> int:
        """Number of channels."""

    @abstractmethod
    def chunks(self, block: int) -> Iterator[tuple[int, list[NDArray[Any]]]]:
        """Yield all samples in order.

        Parameters
        ----------
        block : int
            Chunks begin at multiples of this, so that no block is cut.

        Yields
        ------
        tuple of (int, list of ndarray)
            Number of the first sample, and the samples of each channel, NaN where missing.
        """

    @abstractmethod
    def stretch(self, channel: int, first: int, last: int) -> NDArray[Any]:
        """Return the samples first ≤ n < last of a channel, counted from the source's first."""

    def channels(self) -> list["SourceChannel"]:
        """Return the channels by themselves."""
        return [SourceChannel(self, number) for number in range(self.width)]


class SourceChannel:
    """One channel of a source, for a look here and there.

    Parameters
    ----------
    source : LineSource
        The source.
    number : int
        Which of its channels.
    """

    def __init__(self, source: LineSource, number: int) -> None:
        self._source, self._number = source, number

    def __len__(self) -> int:
        return self._source.length

    def stretch(self, first: int, last: int) -> NDArray[Any]:
        """Return the samples first ≤ n < last, counted from the first."""
        return self._source.stretch(self._number, first, last)


class ArraySource(LineSource):
    """Samples in memory.

    Parameters
    ----------
    channels : sequence of ndarray, shape (n,)
        Response and perhaps drive, of any real type, NaN where missing.
    rate_hz : float
        Sampling rate [Hz].
    start : int
        Number of the first sample.
    is_whole : bool
        False for a part of a recording, which may be short or empty.
    """

    def __init__(
        self,
        channels: Sequence[NDArray[Any]],
        rate_hz: float,
        start: int = 0,
        *,
        is_whole: bool = True,
    ) -> None:
        self.arrays = _checked(channels, is_whole=is_whole)
        super().__init__(rate_hz, start, len(self.arrays[0]))

    @property
    def width(self) -> int:
        """Number of channels."""
        return len(self.arrays)

    def chunks(self, block: int) -> Iterator[tuple[int, list[NDArray[Any]]]]:  # noqa: ARG002  # nothing is cut
        """Yield everything at once; no copy is made."""
        yield self.start, self.arrays

    def stretch(self, channel: int, first: int, last: int) -> NDArray[Any]:
        """Return a view of some samples of a channel."""
        return self.arrays[channel][first:last]


class RecordingSource(LineSource):
    """Samples of a recording, read chunk by chunk, so that memory stays bounded.

    Parameters
    ----------
    recording : Recording
        Opened.
    positions : sequence of int
        Response and perhaps drive in ``recording.channels``.
    from_s, to_s : float, optional
        The stretch [s], as :meth:`firmware_bridge.trace.Recording.trace` takes it.
    """

    def __init__(
        self,
        recording: "Recording",
        positions: Sequence[int],
        from_s: float | None = None,
        to_s: float | None = None,
    ) -> None:
        start, stop = recording.span(from_s, to_s)
        super().__init__(recording.rate_hz, start, stop - start)
        self.recording, self.positions = recording, list(positions)
        self.over_range = [0] * len(self.positions)
        """Over-range samples of each channel, after a pass over all chunks."""
        if self.length < _FEWEST_SAMPLES:
            raise CalibrationError(
                f"samples must have at least {_FEWEST_SAMPLES} values, got {self.length}"
            )

    @property
    def width(self) -> int:
        """Number of channels."""
        return len(self.positions)

    def chunks(self, block: int) -> Iterator[tuple[int, list[NDArray[Any]]]]:
        """Yield the stretch in pieces of about a million samples."""
        step = max(1, _CHUNK_SAMPLES // block) * block
        stop = self.start + self.length
        edges = [self.start, *range((self.start // step + 1) * step, stop, step), stop]
        self.over_range = [0] * self.width
        # The next chunk is read while the one before is summed: both let go of Python's lock.
        with ThreadPoolExecutor(1) as reader:
            ahead = reader.submit(self._chunk, *edges[:2])
            for first, last in pairwise(edges[1:]):
                chunk, ahead = ahead.result(), reader.submit(self._chunk, first, last)
                yield chunk
            yield ahead.result()

    def _chunk(self, first: int, last: int) -> tuple[int, list[NDArray[Any]]]:
        span = self.recording.read(self.positions, first, last)
        if span.over_range:
            for k, position in enumerate(self.positions):
                self.over_range[k] += self.recording.read([position], first, last).over_range
        return first, [np.ascontiguousarray(span.values[:, k]) for k in range(self.width)]

    def stretch(self, channel: int, first: int, last: int) -> NDArray[Any]:
        """Return some samples of a channel."""
        begin = self.start + first
        read = self.recording.read([self.positions[channel]], begin, self.start + last)
        return np.asarray(read.values[:, 0])


def _checked(channels: Sequence[NDArray[Any]], *, is_whole: bool) -> list[NDArray[Any]]:
    """Return channels as arrays of one length; those of a whole recording must hold values."""
    arrays = [np.asarray(channel) for channel in channels]
    for name, channel in zip(("samples", "drive"), arrays, strict=False):
        if channel.ndim != 1:
            raise CalibrationError(f"{name} must have shape (n,), got {channel.shape}")
        if len(channel) != len(arrays[0]):
            raise CalibrationError(
                f"drive must have {len(arrays[0])} samples like the response, got {len(channel)}"
            )
        if is_whole:
            _check_values(name, channel)
    return arrays


def _check_values(name: str, channel: NDArray[Any]) -> None:
    if len(channel) < _FEWEST_SAMPLES:
        raise CalibrationError(
            f"{name} must have at least {_FEWEST_SAMPLES} values, got {len(channel)}"
        )
    if not np.isfinite(channel[-_FEWEST_SAMPLES:]).all() and not np.isfinite(channel).any():
        raise CalibrationError(f"{name}: no value is there, all are NaN")
